"""The journal as the loop of a bench process writes it: everything kept, everything but rows told to the client."""

from __future__ import annotations

from collections.abc import Sequence

from drivers.rows import RowBlock, RowFrame
from rig.bench.lines import LineWriter
from rig.bench.remote_analysis import RemoteAnalysis
from rig.events import Event
from rig.record.journal import JournalWriter
from rig.verdicts import Verdict, verdict_to_json


class ToldJournal:
    """A journal whose events the client hears of."""

    def __init__(self, journal: JournalWriter, client: LineWriter) -> None:
        self._journal = journal
        self._client = client

    @property
    def free_bytes(self) -> int:
        return self._journal.free_bytes

    def frame(self, frame: RowFrame) -> None:
        self._journal.frame(frame)

    def losses(self, rows: int, frames: int, overruns: int) -> None:
        self._journal.losses(rows, frames, overruns)

    def event(self, event: Event) -> None:
        self._journal.event(event)
        self._client.send({"event": event.to_json()})

    def flush(self) -> None:
        self._journal.flush()


class JournalledAnalysis:
    """The remote analysis, whose verdicts are written down and told as they arrive."""

    def __init__(self, analysis: RemoteAnalysis, journal: JournalWriter, client: LineWriter) -> None:
        self._analysis = analysis
        self._journal = journal
        self._client = client
        self.kept = 0

    def feed(self, blocks: Sequence[RowBlock], events: Sequence[Event]) -> list[Verdict]:
        self._analysis.written(self._journal.written)
        verdicts = self._analysis.feed(blocks, events)
        for verdict in verdicts:
            self.keep(verdict)
        for picture in self._analysis.pictures():
            self._client.send_line(picture)
        return verdicts

    def keep(self, verdict: Verdict) -> None:
        self.kept += 1
        told = verdict_to_json(verdict)
        self._journal.result({"which": "live", **told})
        self._client.send({"verdict": told})
