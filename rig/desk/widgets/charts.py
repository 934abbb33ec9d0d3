"""A view whose range we set ourselves, with its scales; charts stand one under the other on a canvas."""

from __future__ import annotations

import numpy as np
import pyqtgraph as pg
from numpy.typing import NDArray
from PySide6.QtCore import QRectF, Qt
from PySide6.QtGui import QBrush, QFont, QFontMetricsF, QPainter, QPainterPath, QPen
from PySide6.QtWidgets import QGraphicsItem, QStyleOptionGraphicsItem, QWidget

from rig.desk.model.ranges import ticks
from rig.desk.theme import Theme
from rig.desk.widgets.axes import LightLines, Scale, Ticks, Words

Values = NDArray[np.float64]

#: Pixels between a view and the scale at its left: what is painted anew is taken 2 pixels wider on both sides.
GAP = 6.0


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
        # What moves is not to touch the scales beside it, or they would be painted with it each time.
        self.ci.layout.setHorizontalSpacing(GAP)

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

    def set_shown(self, shown: bool) -> None:
        """A chart that is hidden takes no room."""
        self.view.setVisible(shown)
        self.left.setVisible(shown)

    def curve(self, z: float = 0.0, *, smooth: bool = False) -> Curve:
        """A curve in this view. Smooth ones cost too much to be drawn 30 times a second."""
        made = Curve(z, smooth=smooth)
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


class Drawn(QGraphicsItem):
    """A path in the units of a view, drawn with one pen and one brush and without a look at anything else.

    Ranges are set by whoever knows what is to be seen, so nothing is worked out here for a range of its own.
    """

    def __init__(self, z: float = 0.0, *, smooth: bool = False) -> None:
        super().__init__()
        self.setZValue(z)
        self._smooth = smooth
        self._pen, self._brush = QPen(Qt.PenStyle.NoPen), QBrush()
        self._path, self._bounds = QPainterPath(), QRectF()

    def pen(self) -> QPen:
        return self._pen

    def brush(self) -> QBrush:
        return self._brush

    def path(self) -> QPainterPath:
        return self._path

    def set_pen(self, pen: QPen) -> None:
        self._pen = pen
        self.update()

    def set_brush(self, brush: QBrush) -> None:
        self._brush = brush
        self.update()

    def boundingRect(self) -> QRectF:
        return self._bounds

    def paint(
        self, painter: QPainter, option: QStyleOptionGraphicsItem, widget: QWidget | None = None
    ) -> None:
        painter.setRenderHint(QPainter.RenderHint.Antialiasing, self._smooth)
        painter.setPen(self._pen)
        painter.setBrush(self._brush)
        painter.drawPath(self._path)

    def _take(self, x: Values, y: Values, connect: str | NDArray[np.bool_]) -> None:
        self.prepareGeometryChange()
        if not len(x):
            self._path, self._bounds = QPainterPath(), QRectF()
            return
        self._path = pg.arrayToQPath(x, y, connect=connect, finiteCheck=False)
        left, right, low, high = float(x.min()), float(x.max()), float(y.min()), float(y.max())
        # Room for the pen, whose width is in pixels.
        wide, tall = 0.02 * (right - left) + 1e-9, 0.1 * (high - low) + 1e-9
        self._bounds = QRectF(left - wide, low - tall, right - left + 2.0 * wide, high - low + 2.0 * tall)


class Curve(Drawn):
    """A line through points; `xs` and `ys` are those drawn, shape (n,)."""

    def __init__(self, z: float = 0.0, *, smooth: bool = False) -> None:
        super().__init__(z, smooth=smooth)
        self.xs = self.ys = np.empty(0)
        self.connect: str | NDArray[np.bool_] = "all"

    def draw(self, x: Values, y: Values, broken: NDArray[np.bool_] | None = None) -> None:
        """New points; no line leads to those that are `broken`."""
        cut = broken is not None and bool(broken[1:].any())
        self._draw(x, y, np.append(~broken[1:], True) if cut and broken is not None else "all")

    def draw_pairs(self, x: Values, y: Values) -> None:
        """A line from each point of even number to the one after it."""
        self._draw(x, y, "pairs")

    def clear(self) -> None:
        if len(self.xs):
            self.draw(np.empty(0), np.empty(0))

    def _draw(self, x: Values, y: Values, connect: str | NDArray[np.bool_]) -> None:
        self.xs, self.ys, self.connect = x, y, connect
        self._take(x, y, connect)


class Band(Drawn):
    """The area between least and greatest values over x; `xs`, `low` and `high` are those drawn, shape (n,)."""

    def __init__(self, z: float = -1.0) -> None:
        super().__init__(z)
        self.xs = self.low = self.high = np.empty(0)

    def draw(self, x: Values, low: Values, high: Values) -> None:
        self.xs, self.low, self.high = x, low, high
        self._take(np.concatenate((x, x[::-1])), np.concatenate((low, high[::-1])), "all")

    def clear(self) -> None:
        if len(self.xs):
            self.draw(np.empty(0), np.empty(0), np.empty(0))


def zigzag(time_s: Values, low: Values, high: Values) -> tuple[Values, Values]:
    """Least and greatest value of each column in turn: a line that shows the full height of what is fast."""
    return np.repeat(time_s, 2), np.column_stack((low, high)).ravel()
