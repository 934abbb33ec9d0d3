"""The analysis process: follows the journal of a run and tells verdicts; `python -m rig.bench.analysis`.

    on standard input    {"journal": PATH, "seed": N, "pictures": false}   then {"up_to": BYTES} as the journal grows,
                         {"finish": true} when no more rows come
    on standard output   {"warm": true}, {"verdict": {...}}, {"picture": {...}} (see rig.evaluation.pictures),
                         {"at": TICK} after each look at the journal,
                         {"result": {...}} after finish, {"failed": "..."}

It shares nothing with the bench but the journal, so nothing it does, and no way it dies, can delay a heartbeat.
"""

from __future__ import annotations

import os
import sys
from contextlib import suppress
from dataclasses import replace
from pathlib import Path
from typing import Any

from drivers.channels import Channel, ChannelTable
from drivers.rows import FrameSequence, RowFrame
from rig.bench.lines import LineReader, LineWriter
from rig.bench.warming import warm_up
from rig.description import RigDescription
from rig.evaluation.analyst import Analyst
from rig.evaluation.pictures import standing_map, tap_picture
from rig.evaluation.theory_picture import theory_picture
from rig.events import Event
from rig.files.rig import rig_from_text
from rig.record import journal as jn
from rig.record.errors import RecordError
from rig.record.tail import JournalTail
from rig.verdicts import LevelVerdict, TapVerdict, Verdict, verdict_to_json

#: The theory's curve is drawn up to this share of the rig's highest flap rate.
THEORY_TOP = 0.75

YIELDING = 5


class Follower:
    """Feeds an analyst with a journal's records in their order. RecordError if the journal is damaged."""

    def __init__(self, path: Path, seed: int | None = None) -> None:
        self._tail = JournalTail(path)
        self._seed = seed
        self.pictures: list[dict[str, Any]] | None = None  # a list where a display wants them
        self._analyst: Analyst | None = None
        self._sequence = FrameSequence()
        self.tick = 0

    def look(self, up_to: int | None = None) -> list[Verdict]:
        """Verdicts that the records written since the last look make known."""
        told: list[Verdict] = []
        for record in self._tail.poll(up_to):
            told += self._take(record)
        if self.pictures is not None and self._analyst is not None:
            self._draw(self._analyst, told, self.pictures)
        return told

    def _draw(self, analyst: Analyst, told: list[Verdict], pictures: list[dict[str, Any]]) -> None:
        """Pictures of what has become known; they are for the eye, and no result rests on them."""
        numbers = {verdict.tap for verdict in told if isinstance(verdict, TapVerdict)}
        for visit in analyst.visits[-2:]:
            for tap in visit.taps:
                if tap.result.tap in numbers:
                    pictures.append({"tap": tap_picture(analyst.store, tap)})
        if any(isinstance(verdict, LevelVerdict) for verdict in told):
            pictures.append({"map": standing_map(analyst)})

    def finish(self) -> dict[str, Any]:
        """Results of the whole journal, as `haltere analyse --json` tells them."""
        self.look()
        if self._analyst is None:
            raise RecordError("the journal holds no header yet")
        return self._analyst.finish().to_json()

    def _take(self, record: jn.Record) -> list[Verdict]:
        if record.kind == jn.HEADER:
            header = record.fields()
            channels = ChannelTable(tuple(Channel(**fields) for fields in header["channels"]))
            rig = _rig(header, self._seed)
            self._analyst = Analyst(rig, channels, int(header["tick_hz"]))
            if self.pictures is not None:
                self.pictures.append({"theory": theory_picture(rig, THEORY_TOP * rig.limits.flap_hz)})
            return []
        if self._analyst is None:
            return []
        if record.kind == jn.FRAME:
            block = self._sequence.place(RowFrame.unpack(record.payload))
            self.tick = int(block.tick[-1])
            return self._analyst.feed([block], [])
        if record.kind == jn.EVENT:
            return self._analyst.feed([], [Event.from_json(record.fields())])
        return []


def _rig(header: dict[str, Any], seed: int | None) -> RigDescription:
    rig = rig_from_text(str(header["rig_text"]), "the journal's rig")
    if seed is not None and rig.world is not None:
        rig = replace(rig, world=replace(rig.world, seed=seed))
    return rig


def main() -> None:
    with suppress(OSError, AttributeError):
        os.setpriority(os.PRIO_PROCESS, 0, YIELDING)  # whatever it works out can wait for a heartbeat
    reader, writer = LineReader(sys.stdin.fileno()), LineWriter(sys.stdout.fileno())
    warm_up()
    writer.send({"warm": True})
    follower: Follower | None = None
    try:
        while not (reader.ended and follower is None):
            first = reader.wait(0.5)
            lines = ([] if first is None else [first]) + reader.take()
            up_to: int | None = None
            finish = False
            for line in lines:
                if "journal" in line:
                    follower = Follower(Path(line["journal"]), line.get("seed"))
                    follower.pictures = [] if line.get("pictures") else None
                up_to = line.get("up_to", up_to)
                finish = finish or bool(line.get("finish"))
            if follower is not None:
                for verdict in follower.look(None if finish else up_to):
                    writer.send({"verdict": verdict_to_json(verdict)})
                for picture in follower.pictures or ():
                    writer.send({"picture": picture})
                if follower.pictures:
                    follower.pictures.clear()
                writer.send({"at": follower.tick}, droppable=True)
                if finish:
                    writer.send({"result": follower.finish()})
                    break
            if reader.ended:
                break  # the bench has gone; its journal is for `haltere recover`
    except (RecordError, OSError, ValueError) as error:
        writer.send({"failed": str(error)})
    writer.close(30.0)
    # The reading thread still waits on a pipe that may never end.
    os._exit(0)


if __name__ == "__main__":
    main()
