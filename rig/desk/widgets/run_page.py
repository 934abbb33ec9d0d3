"""The page of a run or a replay: halt at the left edge, ladder, traces, the last tap, the map, the interlocks."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from PySide6.QtCore import QElapsedTimer, Qt, Signal
from PySide6.QtWidgets import QFrame, QHBoxLayout, QSplitter, QVBoxLayout, QWidget

from rig.bench.job import Job
from rig.description import RigDescription
from rig.desk.model.ladder_model import PlannedLevel
from rig.desk.model.run_model import (
    LEVELS,
    MAP,
    OUTCOME,
    PHASE,
    PROMPT,
    STANDING,
    TAP,
    TRIP,
    Changed,
    Rung,
    RunModel,
)
from rig.desk.model.trace_model import RingSource, StoredSource
from rig.desk.theme import Theme
from rig.desk.widgets.halt_strip import HaltStrip
from rig.desk.widgets.interlocks import InterlockView
from rig.desk.widgets.ladder import LadderView
from rig.desk.widgets.map_view import MapView
from rig.desk.widgets.prompt_banner import PromptBanner
from rig.desk.widgets.status_line import StatusLine
from rig.desk.widgets.style import set_kind
from rig.desk.widgets.tap_view import TapView
from rig.desk.widgets.traces import TracesView

if TYPE_CHECKING:
    from rig.desk.model.replay_model import ReplayModel


class RunPage(QWidget):
    """Puts the parts together and gives each what it draws."""

    halted = Signal()
    asked = Signal(str)  # an input of the operator: acknowledge, redo, reject, next, go_on, end
    reasoned = Signal(int, str)  # number of a tap left out, why
    tap_wanted = Signal(int)
    said = Signal(str)  # a sentence for the foot of the window

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._source: RingSource | StoredSource | None = None
        self._row_hz: float | None = None
        self._tick = -1
        self._since = QElapsedTimer()
        self._since.start()
        self._live = False
        self._rungs: list[Rung] = []
        self.halt = HaltStrip(theme)
        self.status = StatusLine(theme)
        self.prompt = PromptBanner(theme)
        self.ladder = LadderView(theme)
        self.traces = TracesView(theme)
        self.tap = TapView(theme)
        self.map = MapView(theme)
        self.interlocks = InterlockView(theme)
        self._parts = (
            self.halt,
            self.status,
            self.prompt,
            self.ladder,
            self.traces,
            self.tap,
            self.map,
            self.interlocks,
        )
        below = QSplitter(Qt.Orientation.Horizontal)
        below.addWidget(self.tap)
        below.addWidget(self.map)
        middle = QSplitter(Qt.Orientation.Vertical)
        middle.addWidget(self.traces)
        middle.addWidget(below)
        middle.setStretchFactor(0, 5)
        middle.setStretchFactor(1, 6)
        self.columns = QSplitter(Qt.Orientation.Horizontal)
        self._limits = _panel(self.interlocks)
        for part, stretch in ((_panel(self.ladder), 2), (middle, 7), (self._limits, 2)):
            self.columns.addWidget(part)
            self.columns.setStretchFactor(self.columns.count() - 1, stretch)
        for splitter in (below, middle, self.columns):
            splitter.setChildrenCollapsible(False)
        right = QVBoxLayout()
        right.setContentsMargins(0, 0, 0, 0)
        right.setSpacing(4)
        right.addWidget(self.status)
        right.addWidget(self.prompt)
        right.addWidget(self.columns, 1)
        row = QHBoxLayout(self)
        row.setContentsMargins(0, 0, 0, 0)
        row.setSpacing(0)
        row.addWidget(self.halt)
        row.addLayout(right, 1)
        self.halt.halted.connect(self.halted)
        for signal, kind in (
            (self.prompt.acknowledged, "acknowledge"),
            (self.prompt.redo, "redo"),
            (self.prompt.reject, "reject"),
            (self.prompt.enough, "next"),
            (self.prompt.go_on, "go_on"),
            (self.prompt.end, "end"),
        ):
            signal.connect(lambda kind=kind: self.asked.emit(kind))
        self.prompt.reason.connect(self.reasoned)
        self.ladder.tap_chosen.connect(self.tap_wanted)
        self.tap.chosen.connect(self.tap_wanted)
        self.map.level_chosen.connect(self._level_chosen)
        for plot in (self.traces, self.tap, self.map):
            plot.failed.connect(self.said)
            plot.saved.connect(lambda path: self.said.emit(f"Saved as {path}"))

    def set_theme(self, theme: Theme) -> None:
        for part in self._parts:
            part.set_theme(theme)

    # -- what is shown ---------------------------------------------------------------------------------

    def begin(self, job: Job, rig: RigDescription, protocol: str, planned: Sequence[PlannedLevel]) -> None:
        """A run begins: its rows come through the job's ring."""
        self.set_replay(False)
        self._show(RingSource(Path(job.ring), rig), planned)
        self.status.set_names(rig.name, protocol, job.port or "simulated, in real time")
        self._row_hz = rig.sample_hz

    def begin_replay(self, player: ReplayModel, protocol: str, name: str) -> None:
        """A stored session is shown."""
        self.set_replay(True)
        self._show(StoredSource(player.stream, player.rig), ())
        self.status.set_names(player.rig.name, protocol, name)
        self.status.set_link(None)
        self._row_hz = None

    def _show(self, source: RingSource | StoredSource, planned: Sequence[PlannedLevel]) -> None:
        self.end()
        self._source = source
        self._tick, self._since = -1, QElapsedTimer()
        self._since.start()
        self.ladder.set_planned(planned)
        self.traces.set_source(source)

    def end(self) -> None:
        """Let go of the rows."""
        self.traces.set_source(None)
        if isinstance(self._source, RingSource):
            self._source.close()
        self._source = None

    def tick(self) -> None:
        """Once a drawing: traces, and how old the newest row is."""
        self.traces.tick()
        if self._row_hz is not None and self._live:
            self.status.set_link(float(self._since.elapsed()), self._row_hz)

    def _level_chosen(self, direction: str, drive_v: float) -> None:
        """A point of the map was chosen: its last tap is shown beside it."""
        taps = [
            mark.tap
            for rung in self._rungs
            if rung.direction == direction and abs(rung.drive_v - drive_v) < 1e-6
            for mark in rung.taps
        ]
        if taps:
            self.tap_wanted.emit(taps[-1])

    def set_replay(self, replay: bool) -> None:
        """A replay has no drive to take away."""
        self.halt.setVisible(not replay)
        self._limits.setVisible(not replay)
        self.status.set_replay(replay)
        self.prompt.set_replay(replay)

    def refresh(self, model: RunModel, changed: Changed) -> None:
        """Draw what has changed."""
        if model.tick != self._tick:
            self._tick = model.tick
            self._since.restart()
        self._rungs = model.rungs
        self._live = model.phase not in ("idle", "starting", "finished", "failed")
        if changed & {STANDING, PHASE, OUTCOME}:
            self.status.refresh(model)
            self.traces.refresh(model)
            if not self._live:
                self.status.set_link(None)
        if changed & {PHASE}:
            self.halt.refresh(model)
        if changed & {PROMPT, PHASE, TRIP, TAP, LEVELS}:
            self.prompt.refresh(model)
        if changed & {LEVELS, PHASE, STANDING}:
            self.ladder.refresh(model)
        if changed & {TAP}:
            self.ladder.set_chosen(model.last_tap)
            self.tap.refresh(model)
        if changed & {MAP}:
            self.map.refresh(model)
        if changed & {STANDING, TRIP, PHASE}:
            self.interlocks.refresh(model)


def _panel(part: QWidget) -> QFrame:
    """A part on the ground of the window's parts."""
    frame = QFrame()
    set_kind(frame, "panel")
    column = QVBoxLayout(frame)
    column.setContentsMargins(4, 4, 4, 4)
    column.addWidget(part)
    return frame
