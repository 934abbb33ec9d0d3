"""The chart of one signal, and the scale that all of them share."""

from __future__ import annotations

import numpy as np
import pyqtgraph as pg

from rig.desk.model.fold import FoldedSignal
from rig.desk.model.ranges import CalmRange
from rig.desk.model.signals import BODY, UNITS, Trace
from rig.desk.theme import Theme
from rig.desk.widgets.axes import Scale, pen, wash
from rig.desk.widgets.charts import Band, Canvas, Chart, zigzag
from rig.desk.widgets.legend import THICK_SHARE

#: The narrowest range of each signal, in its unit.
LEAST = {
    BODY: 2.0,
    "motor voltage": 1.0,
    "vertical load": 1.0,
    "motor current": 0.4,
    "flap rate": 1.0,
    "carriage height": 1.0,
}
NAMES = {"motor voltage": "drive", "vertical load": "load", "motor current": "current"}


class Seconds(Scale):
    """The scale under the last chart shown, whichever that is."""

    def __init__(self, view: pg.ViewBox) -> None:
        super().__init__(view, "bottom")

    def stand_under(self, view: pg.ViewBox) -> None:
        self._view = view
        self.update()


class SignalChart(Chart):
    """One signal: its course, its mean over each turn if it has one, its range."""

    def __init__(self, canvas: Canvas, row: int, measures: str) -> None:
        super().__init__(canvas, row)
        self.measures = measures
        self.name = NAMES.get(measures, measures)
        self.left.set_name(self.name, UNITS[measures])
        self.range = CalmRange(LEAST[measures])
        self.course = self.curve(0.0)
        self.mean = self.curve(2.0)
        self.band = Band()
        self.add(self.band)
        self.held = False  # its range stays as it is

    def set_theme(self, theme: Theme) -> None:
        self.course.set_pen(pen(theme.trace))
        self.mean.set_pen(pen(theme.mean))
        self.band.set_brush(wash(theme.trace, THICK_SHARE))

    def show_old(self, theme: Theme, old: bool) -> None:
        """A picture that is not of now is pale."""
        self.course.set_pen(pen(theme.rule if old else theme.trace))
        self.mean.set_pen(pen(theme.faint if old else theme.mean))

    def draw_course(self, trace: Trace, mean: Trace | None) -> None:
        self.band.clear()
        broken = np.zeros(2 * len(trace.broken), bool)
        broken[::2] = trace.broken  # before the column, not inside it
        self.course.draw(*zigzag(trace.time_s, trace.low, trace.high), broken)
        if mean is None:
            self.mean.clear()
        else:
            self.mean.draw(mean.time_s, mean.low, mean.broken)

    def draw_folded(self, folded: FoldedSignal) -> None:
        self.band.draw(folded.phase_deg, folded.low, folded.high)
        self.course.draw(folded.last_phase_deg, folded.last)
        self.mean.draw(folded.phase_deg, folded.mean)

    def clear(self) -> None:
        for drawn in (self.band, self.course, self.mean):
            drawn.clear()

    def forget(self) -> None:
        """As if nothing had been drawn."""
        self.clear()
        self.set_empty()
        self.lines.across = ()
        self.range.forget()
        self.held = False

    def fit(self, low: float, high: float, at_s: float) -> tuple[float, float] | None:
        """A new range for what is to be seen, or None if it stays."""
        if self.held or not self.range.take(low, high, at_s):
            return None
        return self.range.low, self.range.high
