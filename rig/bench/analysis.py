"""The analysis process: follows the journal of a run and tells verdicts; `python -m rig.bench.analysis`.

    on standard input    {"journal": PATH, "seed": N}   then {"up_to": BYTES} as the journal grows,
                         {"finish": true} when no more rows come
    on standard output   {"warm": true}, {"verdict": {...}}, {"at": TICK} after each look at the journal,
                         {"result": {...}} after finish, {"failed": "..."}

It shares nothing with the bench but the journal, so nothing it does, and no way it dies, can delay a heartbeat.
"""

from __future__ import annotations

import os
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

from drivers.channels import Channel, ChannelTable
from drivers.rows import FrameSequence, RowFrame
from rig.bench.lines import LineReader, LineWriter
from rig.bench.warming import warm_up
from rig.description import RigDescription
from rig.evaluation.analyst import Analyst
from rig.events import Event
from rig.files.rig import rig_from_text
from rig.record import journal as jn
from rig.record.errors import RecordError
from rig.record.tail import JournalTail
from rig.verdicts import Verdict, verdict_to_json


class Follower:
    """Feeds an analyst with a journal's records in their order. RecordError if the journal is damaged."""

    def __init__(self, path: Path, seed: int | None = None) -> None:
        self._tail = JournalTail(path)
        self._seed = seed
        self._analyst: Analyst | None = None
        self._sequence = FrameSequence()
        self.tick = 0

    def look(self, up_to: int | None = None) -> list[Verdict]:
        """Verdicts that the records written since the last look make known."""
        told: list[Verdict] = []
        for record in self._tail.poll(up_to):
            told += self._take(record)
        return told

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
            self._analyst = Analyst(_rig(header, self._seed), channels, int(header["tick_hz"]))
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
                up_to = line.get("up_to", up_to)
                finish = finish or bool(line.get("finish"))
            if follower is not None:
                for verdict in follower.look(None if finish else up_to):
                    writer.send({"verdict": verdict_to_json(verdict)})
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
