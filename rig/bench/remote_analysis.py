"""The analysis as the loop sees it: verdicts that arrive when they are ready, and a watch on their maker."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Sequence
from contextlib import suppress
from pathlib import Path
from typing import Any

from drivers.clock import Clock
from drivers.rows import RowBlock
from rig.bench.lines import LineReader, LineWriter
from rig.events import Event
from rig.verdicts import Verdict, verdict_from_json

#: A level's fit takes tenths of a second; an analysis silent for so long is stuck.
STUCK_S = 5.0
#: The first start on a machine compiles kernels.
WARM_S = 180.0
FINISH_S = 600.0
#: How a line with a picture begins; it is handed on to the client unread.
PICTURE = b'{"picture":'


class AnalysisGone(Exception):
    """The analysis process has died or is stuck; `str(error)` says which."""


class RemoteAnalysis:
    """An analysis process of its own, which reads the journal. Rows and events given to `feed` are in there."""

    def __init__(self, clock: Clock) -> None:
        self._clock = clock
        self._process = subprocess.Popen(
            [sys.executable, "-m", "rig.bench.analysis"], stdin=subprocess.PIPE, stdout=subprocess.PIPE
        )
        assert self._process.stdin is not None and self._process.stdout is not None
        self._reader = LineReader(self._process.stdout.fileno(), self._hear, PICTURE)
        self._writer = LineWriter(self._process.stdin.fileno())
        self._heard_s = clock.now_s()
        self._up_to = 0
        self._result: dict[str, Any] | None = None
        self._failed = ""
        self.at_tick = 0
        self._warm = False
        self._pictures: list[bytes] = []

    @property
    def pid(self) -> int:
        return self._process.pid

    def _hear(self) -> None:
        self._heard_s = self._clock.now_s()

    def wait_until_warm(self) -> None:
        """Kernels compiled, libraries loaded. AnalysisGone if that never comes."""
        end_s = self._clock.now_s() + WARM_S
        while not self._warm:
            line = self._reader.wait(0.1)
            if line is not None:
                self._take(line)
            elif self._reader.ended or self._clock.now_s() > end_s:
                raise AnalysisGone("the analysis process did not start")

    def follow(self, journal: Path, seed: int | None, pictures: bool = False) -> None:
        self._heard_s = self._clock.now_s()
        self._writer.send({"journal": str(journal.absolute()), "seed": seed, "pictures": pictures})

    def pictures(self) -> list[bytes]:
        """What has come for a display, lines of JSON as they came."""
        come, self._pictures = self._pictures, []
        return come

    def written(self, length: int) -> None:
        """The journal can be read up to here."""
        if length != self._up_to:
            self._up_to = length
            self._writer.send({"up_to": length}, droppable=True)

    def feed(self, blocks: Sequence[RowBlock], events: Sequence[Event]) -> list[Verdict]:
        """Verdicts that have arrived."""
        told = []
        for line in self._reader.take():
            verdict = self._take(line)
            if verdict is not None:
                told.append(verdict)
        return told

    def trouble(self) -> str:
        """What is wrong with the analysis, "" while it works."""
        if self._failed:
            return f"the analysis has failed: {self._failed}"
        if self._reader.ended and self._result is None:
            return "the analysis process has died"
        silent_s = self._clock.now_s() - self._heard_s
        if silent_s > STUCK_S:
            return f"the analysis process has been silent for {silent_s:.0f} s"
        return ""

    def finish(self) -> tuple[list[Verdict], dict[str, Any]]:
        """The last verdicts and the results of the whole journal. AnalysisGone if there will be none."""
        self._writer.send({"finish": True})
        self._heard_s = self._clock.now_s()
        told: list[Verdict] = []
        end_s = self._clock.now_s() + FINISH_S
        while self._result is None:
            line = self._reader.wait(0.1)
            if line is not None:
                verdict = self._take(line)
                if verdict is not None:
                    told.append(verdict)
                continue
            if self._failed or self._reader.ended or self._clock.now_s() > end_s:
                raise AnalysisGone(self.trouble() or "the analysis process did not finish")
        return told, self._result

    def close(self) -> None:
        """End the process, whatever state it is in."""
        self._process.kill()
        self._process.wait()
        self._writer.close(0.5)
        for pipe in (self._process.stdin, self._process.stdout):
            if pipe is not None:
                with suppress(OSError):  # unsent lines for a process that has gone
                    pipe.close()

    def _take(self, line: dict[str, Any]) -> Verdict | None:
        if "verdict" in line:
            return verdict_from_json(line["verdict"])
        if "at" in line:
            self.at_tick = int(line["at"])
        elif "line" in line:
            self._pictures.append(line["line"])
        elif "warm" in line:
            self._warm = True
        elif "result" in line:
            self._result = line["result"]
        elif "failed" in line:
            self._failed = str(line["failed"])
        return None
