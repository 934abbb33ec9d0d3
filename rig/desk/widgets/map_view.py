"""The stability map as it grows: what holds the body, against how fast the wings beat.

Click a level, or go through them with Left and Right and press Return: `level_chosen` tells which one.
"""

from __future__ import annotations

import math

import numpy as np
import pyqtgraph as pg
from PySide6.QtCore import QEvent, QObject, QPoint, QPointF, QRectF, Qt, Signal
from PySide6.QtGui import QBrush, QColor, QFontMetricsF, QHelpEvent, QKeyEvent, QMouseEvent, QPainterPath
from PySide6.QtWidgets import QGraphicsRectItem, QLabel, QToolTip, QWidget

from rig.desk.model.map_model import (
    DIRECTIONS,
    MapPage,
    MapPoint,
    empty_ranges,
    hertz_marks,
    map_page,
    squares_seen,
    stiffness_seen,
)
from rig.desk.model.ranges import WideningRange, ticks
from rig.desk.model.run_model import RunModel
from rig.desk.theme import Theme
from rig.desk.widgets.axes import Caption, dashed, pen, wash
from rig.desk.widgets.charts import Canvas, Chart
from rig.desk.widgets.legend import BAND_SHARE, DASHES, Entry, Legend
from rig.desk.widgets.saving import Column, SavablePlot

#: Size of a mark and how near to it a click must be, in heights of a line.
MARK, NEAR = 0.75, 0.8
#: Height of the strip of levels that have no stiffness, in lines.
STRIP = 2.0
LINE_WIDTH = 1.5
BAND_LINE = {"falling": "dash_dot", "rising": "dots"}
NOTHING = "No level yet"
HINT = "Choose a level for its numbers: a click, or the arrow keys."


class MapView(SavablePlot):
    """Slow stiffness (1/s^2) against flap rate squared (Hz^2). `level_chosen` carries direction and drive (V)."""

    level_chosen = Signal(str, float)

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(theme, "map", parent)
        self.setAccessibleName("stability map")
        self.page: MapPage = map_page(RunModel())
        self.chosen: tuple[str, float] | None = None
        self._model: RunModel | None = None
        self._squares, self._stiffnesses = WideningRange(0.06), WideningRange(0.1)
        self.canvas = Canvas()
        self.column.addWidget(self.canvas, 1)
        self.caption = Caption("slow stiffness (1/s²)", "flap rate (Hz)")
        self.canvas.addItem(self.caption, row=0, col=0, colspan=2)
        self.chart = Chart(self.canvas, 1, bottom=True, top=True)
        assert self.chart.bottom is not None and self.chart.top is not None
        self.chart.bottom.set_name("flap rate squared", "Hz²")
        self.zero = pg.InfiniteLine(0.0, angle=0)
        self.zero.setZValue(-20.0)
        self.chart.add(self.zero)
        self.fit, self.theory = self.chart.curve(1.0, smooth=True), self.chart.curve(0.5, smooth=True)
        self.bands = {direction: QGraphicsRectItem() for direction in DIRECTIONS}
        self.edges = {direction: pg.InfiniteLine(0.0, angle=90) for direction in DIRECTIONS}
        self.bars = {direction: self.chart.curve(2.0) for direction in DIRECTIONS}
        # Drawn as lines each time, not as pictures of marks: they stay sharp in a saved drawing.
        look = {"pxMode": True, "antialias": True, "useCache": False}
        self.marks = {direction: pg.ScatterPlotItem(**look) for direction in DIRECTIONS}
        self.ring = pg.ScatterPlotItem(**look, symbol="o")
        for direction in DIRECTIONS:
            self.bands[direction].setZValue(-50.0)
            self.bands[direction].setPen(Qt.PenStyle.NoPen)
            self.edges[direction].setZValue(-40.0)
            self.marks[direction].setZValue(3.0)
            for item in (self.bands[direction], self.edges[direction], self.marks[direction]):
                self.chart.add(item)
        self.ring.setZValue(4.0)
        self.chart.add(self.ring)
        self.key = Legend(theme)
        self.column.addWidget(self.key)
        self.told = QLabel()
        self.told.setWordWrap(True)
        self.told.setTextFormat(Qt.TextFormat.PlainText)
        self.told.setAlignment(Qt.AlignmentFlag.AlignTop | Qt.AlignmentFlag.AlignLeft)
        self.column.addWidget(self.told)
        self.canvas.viewport().installEventFilter(self)
        self.chart.view.sigResized.connect(self._resized)
        self._ready = True
        self.look_again()

    # -- what is shown ---------------------------------------------------------------------------------

    def refresh(self, model: RunModel) -> None:
        """Draw the map of a run; a range once seen is never left while the run is the same."""
        if model is not self._model:
            self._model, self.chosen = model, None
            self._squares.forget()
            self._stiffnesses.forget()
        self.page = map_page(model)
        self._draw()

    @property
    def point(self) -> MapPoint | None:
        """The level chosen."""
        for point in self.page.points:
            if (point.direction, point.drive_v) == self.chosen:
                return point
        return None

    def choose(self, point: MapPoint, *, tell: bool) -> None:
        """Show a level's numbers; `tell`: emit `level_chosen`, too."""
        self.chosen = point.direction, point.drive_v
        self._show_chosen()
        if tell:
            self.level_chosen.emit(point.direction, point.drive_v)

    # -- drawing ---------------------------------------------------------------------------------------

    def _draw(self) -> None:
        page = self.page
        self._set_ranges()
        self.fit.draw(*page.fit)
        self.theory.draw(*page.theory)
        found = {band.direction: band for band in page.bands}
        (_, _), (low, high) = self.chart.view.viewRange()
        for direction in DIRECTIONS:
            band = found.get(direction)
            self.edges[direction].setVisible(band is not None)
            self.bands[direction].setVisible(
                band is not None and band.low_hz is not None and band.high_hz is not None
            )
            if band is not None:
                self.edges[direction].setPos(band.flap_hz**2)
                if band.low_hz is not None and band.high_hz is not None:
                    wide = band.high_hz**2 - band.low_hz**2
                    self.bands[direction].setRect(QRectF(band.low_hz**2, low, wide, high - low))
            self._draw_levels(direction)
        self.zero.setVisible(bool(page.points) or len(page.theory[0]) > 0)
        self.chart.words.say("" if page.points else NOTHING)
        self._show_key()
        self._show_chosen()
        self.update()

    def _draw_levels(self, direction: str) -> None:
        colour = self.theme.falling if direction == "falling" else self.theme.rising
        points = [point for point in self.page.points if point.direction == direction]
        x: list[float] = []
        y: list[float] = []
        for point in points:
            square, stiffness, rate = point.square, point.stiffness_per_s2, point.flap_hz
            if point.on_strip:
                continue
            if stiffness.low is not None and stiffness.high is not None:
                x += [square, square]
                y += [stiffness.low, stiffness.high]
            if rate.low is not None and rate.high is not None:
                x += [rate.low**2, rate.high**2]
                y += [float(stiffness.value or 0.0)] * 2
        self.bars[direction].draw_pairs(np.array(x), np.array(y))
        self.marks[direction].setData(
            x=[point.square for point in points],
            y=[self._height(point) for point in points],
            symbol=[symbol(direction, point.shape) for point in points],
            size=MARK * self._line,
            pen=pen(colour, LINE_WIDTH * self.pixel),
            brush=[
                QBrush(QColor(colour if point.shape == "filled" else self.theme.panel)) for point in points
            ],
            data=points,
        )

    def _height(self, point: MapPoint) -> float:
        """Where a level stands, 1/s^2; those without a stiffness on the strip, rising ones above falling ones."""
        if not point.on_strip:
            return float(point.stiffness_per_s2.value or 0.0)
        (_, _), (low, high) = self.chart.view.viewRange()
        lines = 1.3 if point.direction == "rising" else 0.5
        return low + lines * self._line * (high - low) / max(self.chart.view.height(), 1.0)

    def _set_ranges(self) -> None:
        page, chart = self.page, self.chart
        assert chart.top is not None
        if not page.points and not len(page.theory[0]):
            chart.set_empty()
            return
        squares, stiffnesses = empty_ranges(page)
        x = self._squares.take(squares_seen(page), squares)
        x = (max(x[0], 0.0), x[1])
        low, high = self._stiffnesses.take(stiffness_seen(page), stiffnesses)
        bottom = low
        if any(point.on_strip for point in page.points):
            share = min(STRIP * self._line / max(chart.view.height(), 1.0), 0.4)
            bottom -= share / (1.0 - share) * (high - low)
        strip = bottom < low
        chart.numbers_from = low if strip else -math.inf
        chart.below_numbers = ((0.5 * (bottom + low), "none"),) if strip else ()
        chart.lines.across = ((low, ""),) if strip else ()
        wide = max(chart.view.width(), 1.0) / self._line
        chart.set_range(x, (bottom, high), ticks(*x, max(2, min(8, int(wide / 4.0)))))
        chart.top.set_ticks(hertz_marks(*x, max(3, min(12, int(wide / 2.5)))))

    def _resized(self) -> None:
        if self._ready:
            self._draw()

    def _show_key(self) -> None:
        theme, entries = self.theme, []
        seen = {point.direction for point in self.page.points}
        for direction, shape, colour in (("falling", "down", theme.falling), ("rising", "up", theme.rising)):
            if direction in seen:
                entries.append(Entry(shape, colour, direction))
        shapes = {point.shape for point in self.page.points}
        if "hollow" in shapes:
            entries.append(Entry("down_hollow", theme.ink, "undetermined"))
        if "crossed" in shapes:
            entries.append(Entry("cross", theme.ink, "unstable or not held"))
        for band in self.page.bands:
            colour = theme.falling if band.direction == "falling" else theme.rising
            entries.append(Entry(f"band {BAND_LINE[band.direction]}", colour, band.words))
        if len(self.page.fit[0]):
            entries.append(Entry("line", theme.fit, "fit"))
        if len(self.page.theory[0]):
            entries.append(Entry("dash", theme.theory, "theory"))
        self.key.show_entries(entries)

    def _show_chosen(self) -> None:
        point = self.point
        if point is None:
            self.ring.setData([], [])
            self.told.setText(HINT if self.page.points else "")
        else:
            self.ring.setData([point.square], [self._height(point)])
            self.told.setText(point.words)
        self.told.setToolTip("" if point is None else point.left_out)
        self.setAccessibleDescription(
            f"{len(self.page.points)} levels. " + ("" if point is None else point.words)
        )

    # -- choosing --------------------------------------------------------------------------------------

    def point_near(self, place: QPoint) -> MapPoint | None:
        """The level nearest to a place on the canvas, if it is near."""
        best, least = None, NEAR * self._line
        for point in self.page.points:
            at = self.place_of(point)
            distance = math.hypot(at.x() - place.x(), at.y() - place.y())
            if distance < least:
                best, least = point, distance
        return best

    def place_of(self, point: MapPoint) -> QPointF:
        """Where a level stands on the canvas."""
        scene = self.chart.view.mapViewToScene(QPointF(point.square, self._height(point)))
        return QPointF(self.canvas.mapFromScene(scene))

    def eventFilter(self, watched: QObject, event: QEvent) -> bool:
        if event.type() == QEvent.Type.MouseButtonRelease and isinstance(event, QMouseEvent):
            point = self.point_near(event.position().toPoint())
            if event.button() == Qt.MouseButton.LeftButton and point is not None:
                self.choose(point, tell=True)
        elif event.type() == QEvent.Type.ToolTip and isinstance(event, QHelpEvent):
            point = self.point_near(event.pos())
            if point is None:
                QToolTip.hideText()
            else:
                QToolTip.showText(event.globalPos(), self.tip(point), self.canvas)
            return True
        return super().eventFilter(watched, event)

    def tip(self, point: MapPoint) -> str:
        """A level's numbers, and why taps were left out."""
        return point.words + (f"\n{point.left_out}" if point.left_out else "")

    def keyPressEvent(self, event: QKeyEvent) -> None:
        points, key = self.page.points, event.key()
        if key in (Qt.Key.Key_Left, Qt.Key.Key_Right) and points:
            step = 1 if key == Qt.Key.Key_Right else -1
            held = self.point
            at = points.index(held) + step if held is not None else 0 if step > 0 else len(points) - 1
            self.choose(points[min(max(at, 0), len(points) - 1)], tell=False)
        elif key in (Qt.Key.Key_Return, Qt.Key.Key_Enter) and self.point is not None:
            self.choose(self.point, tell=True)
        else:
            super().keyPressEvent(event)

    # -- look ------------------------------------------------------------------------------------------

    @property
    def _line(self) -> float:
        return QFontMetricsF(self.font()).height()

    def look_again(self) -> None:
        theme, font = self.theme, self.font()
        self.canvas.set_look(theme)
        self.canvas.setMinimumHeight(math.ceil(7.5 * self._line))
        self.caption.set_look(theme, font)
        self.chart.set_look(theme, font, numbers="−000")
        wide = LINE_WIDTH * self.pixel
        self.zero.setPen(pen(theme.ink, self.pixel))
        self.fit.set_pen(pen(theme.fit, wide))
        self.theory.set_pen(dashed(theme.theory, DASHES["dash"], wide))
        for direction in DIRECTIONS:
            colour = theme.falling if direction == "falling" else theme.rising
            self.bands[direction].setBrush(wash(colour, BAND_SHARE))
            self.edges[direction].setPen(dashed(colour, DASHES[BAND_LINE[direction]], self.pixel))
            self.bars[direction].set_pen(pen(colour, self.pixel))
        self.ring.setSize(2.0 * MARK * self._line)
        self.ring.setPen(pen(theme.ink, wide))
        self.ring.setBrush(None)
        self.told.setMinimumHeight(math.ceil(2.0 * self._line))
        self.key.set_theme(theme)
        self._draw()

    # -- keeping ---------------------------------------------------------------------------------------

    def values(self) -> list[Column]:
        points = self.page.points
        found = [
            Column("direction", "", [point.direction for point in points]),
            Column("regime", "", [point.regime for point in points]),
            Column("state", "", [point.state for point in points]),
            Column("drive", "V", [point.drive_v for point in points]),
        ]
        for name, unit, field in (
            ("flap rate", "Hz", "flap_hz"),
            ("slow stiffness", "1/s²", "stiffness_per_s2"),
        ):
            numbers = [getattr(point, field) for point in points]
            for part, words in (("value", ""), ("low", ", 95 % from"), ("high", ", 95 % to")):
                found.append(Column(name + words, unit, [getattr(number, part) for number in numbers]))
        return found


def symbol(direction: str, shape: str) -> QPainterPath:
    """A triangle that points the way the drive went, in a square of side 1; crossed out where nothing was held."""
    way = -1.0 if direction == "rising" else 1.0
    path = QPainterPath(QPointF(-0.5, -0.43 * way))
    path.lineTo(QPointF(0.5, -0.43 * way))
    path.lineTo(QPointF(0.0, 0.43 * way))
    path.closeSubpath()
    if shape == "crossed":
        for one, other in (((-0.5, -0.5), (0.5, 0.5)), ((-0.5, 0.5), (0.5, -0.5))):
            path.moveTo(QPointF(*one))
            path.lineTo(QPointF(*other))
    return path
