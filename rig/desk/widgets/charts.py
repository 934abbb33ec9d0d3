"""A view whose range we set ourselves, with its scales; charts stand one under the other on a canvas."""

from __future__ import annotations

import numpy as np
import pyqtgraph as pg
from numpy.typing import NDArray
from PySide6.QtCore import Qt
from PySide6.QtGui import QFont, QFontMetricsF
from PySide6.QtWidgets import QGraphicsItem, QGraphicsPathItem, QWidget

from rig.desk.model.ranges import ticks
from rig.desk.theme import Theme
from rig.desk.widgets.axes import LightLines, Scale, Ticks, Words

Values = NDArray[np.float64]


class Canvas(pg.GraphicsLayoutWidget):
    """Where charts stand, one under the other. Menus and focus are its parent's."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setContextMenuPolicy(Qt.ContextMenuPolicy.NoContextMenu)
        self.setFocusPolicy(Qt.FocusPolicy.NoFocus)
        self.setCacheMode(pg.GraphicsView.CacheModeFlag.CacheNone)  # a saved drawing would hold a picture
        self.setFrameShape(pg.GraphicsView.Shape.NoFrame)
        self.ci.layout.setContentsMargins(0.0, 0.0, 0.0, 0.0)
        self.ci.layout.setSpacing(0.0)

    def set_look(self, theme: Theme) -> None:
        self.setBackground(theme.panel)


class Chart:
    """One view with a scale at its left and, if wanted, below and above it, in a row of a canvas."""

    def __init__(self, canvas: Canvas, row: int, *, bottom: bool = False, top: bool = False) -> None:
        self.view = pg.ViewBox(enableMenu=False, enableMouse=False)
        self.view.disableAutoRange()
        self.view.setDefaultPadding(0.0)
        canvas.addItem(self.view, row=row + int(top), col=1)
        self.left = Scale(self.view, "left")
        canvas.addItem(self.left, row=row + int(top), col=0)
        self.top = Scale(self.view, "top") if top else None
        if self.top is not None:
            canvas.addItem(self.top, row=row, col=1)
        self.bottom = Scale(self.view, "bottom") if bottom else None
        if self.bottom is not None:
            canvas.addItem(self.bottom, row=row + int(top) + 1, col=1)
        self.lines = LightLines(self.view)
        self.words = Words(self.view)
        self.numbers_from = -np.inf  # no numbers of y below; words that stand there instead
        self.below_numbers: Ticks = ()
        self._empty, self._line_px = True, 1.0
        self.view.sigResized.connect(self._resized)

    def set_look(self, theme: Theme, font: QFont, names_px: float = 0.0, numbers: str = "−00.0") -> None:
        self._line_px = QFontMetricsF(font).height()
        self.left.set_look(theme, font, names_px, numbers)
        for scale in (self.bottom, self.top):
            if scale is not None:
                scale.set_look(theme, font)
        self.lines.set_look(theme, font)
        self.words.set_look(theme, font)

    def curve(self, z: float = 0.0, *, smooth: bool = False) -> pg.PlotCurveItem:
        """A curve in this view; give it data with `draw`. Smooth ones cost too much to be drawn 30 times a second."""
        made = pg.PlotCurveItem(skipFiniteCheck=True, antialias=smooth)
        made.setZValue(z)
        self.add(made)
        return made

    def add(self, item: QGraphicsItem) -> None:
        self.view.addItem(item, ignoreBounds=True)

    def set_range(
        self,
        x: tuple[float, float] | None = None,
        y: tuple[float, float] | None = None,
        x_ticks: Ticks | None = None,
    ) -> None:
        """The part seen. Ticks of x are given, as several charts share them; those of y follow from the height."""
        if x is not None or y is not None:
            self.view.setRange(xRange=x, yRange=y, padding=0.0, update=True, disableAutoRange=False)
            self.view.updateMatrix()  # left to the next painting, it would ask for one more after that
        if y is not None:
            self._number_y()
            self.left.update()
        if x_ticks is not None:
            if self.bottom is not None:
                self.bottom.set_ticks(x_ticks)
            self.lines.set_lines(self.lines.level, x_ticks)
        if x is not None:
            for scale in (self.bottom, self.top):
                if scale is not None:
                    scale.update()
            self.lines.update()
        self._empty = False

    def set_empty(self) -> None:
        """No numbers and no lines: there is nothing to see."""
        self._empty = True
        self.lines.marks = ()
        self.lines.set_lines((), ())
        for scale in (self.left, self.bottom, self.top):
            if scale is not None:
                scale.set_ticks(())

    def _number_y(self) -> None:
        low, high = self.view.viewRange()[1]
        room = self.view.height() / (2.2 * max(self._line_px, 1.0))
        made = [tick for tick in ticks(low, high, max(2, min(6, int(room)))) if tick[0] >= self.numbers_from]
        self.left.set_ticks([*self.below_numbers, *made])
        self.lines.set_lines(made, self.lines.upright)

    def _resized(self) -> None:
        if not self._empty:
            self._number_y()


class Band(QGraphicsPathItem):
    """The area between least and greatest values over x; `x_drawn`, `low`, `high` are those drawn, shape (n,)."""

    def __init__(self, z: float = -1.0) -> None:
        super().__init__()
        self.setPen(Qt.PenStyle.NoPen)
        self.setZValue(z)
        self.x_drawn = self.low = self.high = np.empty(0)

    def draw(self, x: Values, low: Values, high: Values) -> None:
        self.x_drawn, self.low, self.high = x, low, high
        along, around = np.concatenate((x, x[::-1])), np.concatenate((low, high[::-1]))
        self.setPath(pg.arrayToQPath(along, around, connect="all", finiteCheck=False))

    def clear(self) -> None:
        self.draw(np.empty(0), np.empty(0), np.empty(0))


def draw(curve: pg.PlotCurveItem, x: Values, y: Values, broken: NDArray[np.bool_] | None = None) -> None:
    """Give a curve new values; `broken` (per point) leaves out the line that leads to a point."""
    connect: str | NDArray[np.bool_] = "all"
    if broken is not None and broken[1:].any():
        connect = np.append(~broken[1:], True)
    curve.setData(x, y, connect=connect, skipFiniteCheck=True)


def zigzag(time_s: Values, low: Values, high: Values) -> tuple[Values, Values]:
    """Least and greatest value of each column in turn: a line that shows the full height of what is fast."""
    return np.repeat(time_s, 2), np.column_stack((low, high)).ravel()
