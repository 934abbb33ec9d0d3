"""Drawing a ladder that has been laid out: rails, rungs, taps, the pointer, the legend."""

from __future__ import annotations

from dataclasses import dataclass

from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QColor, QFont, QFontMetricsF, QPainter, QPen

from rig.desk.model.ladder_model import RISING, Ladder, ticks
from rig.desk.theme import Theme
from rig.desk.widgets.ladder_layout import DASH, Block, Box, Frame, Sizes, TapBox
from rig.desk.widgets.shapes import blended, draw_shape, focus_ring, rounded, sized

SMALL = 0.82
NO_COURSE = "no course yet"
LEFT = int(Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignVCenter)
RIGHT = int(Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter)
CENTRE = int(Qt.AlignmentFlag.AlignCenter)
MARKERS = {  # of a rung at its rail, by filling and rail
    "filled": ("up", "down"),
    "hollow": ("up_hollow", "down_hollow"),
    "crossed": ("cross", "cross"),
    "open": ("dotted", "dotted"),
}


@dataclass(frozen=True)
class Drawing:
    """What a ladder is drawn with. `focus` and `chosen` are numbers of taps, or None."""

    theme: Theme
    font: QFont
    view: Ladder
    frame: Frame
    sizes: Sizes
    focus: int | None = None
    chosen: int | None = None

    def still(
        self, painter: QPainter, blocks: list[Block], legend: list[tuple[str, str, Box]], next_box: Box
    ) -> None:
        """All that does not move with the pointer."""
        self._heading(painter)
        self._rails(painter)
        for block in blocks:
            self._block(painter, block)
        self._foot(painter, legend, next_box)

    def moving(self, painter: QPainter) -> None:
        """The pointer, and the numbers of the axis, which make room for it."""
        self._ticks(painter)
        self._pointer(painter)

    def _text(
        self, painter: QPainter, box: Box, how: int, text: str, colour: str, bold: bool = False
    ) -> None:
        painter.setFont(sized(self.font, SMALL, bold))
        painter.setPen(QColor(colour))
        painter.drawText(QRectF(*box), how | int(Qt.TextFlag.TextDontClip), text)

    def _heading(self, painter: QPainter) -> None:
        theme = self.theme
        line = (
            self.frame.left + 4.0,
            0.3 * self.sizes.em,
            self.frame.right - self.frame.left - 8.0,
            self.sizes.em,
        )
        side = 0.7 * self.sizes.em
        for shape, at, colour in (
            ("up", line[0], theme.rising),
            ("down", self.frame.right - side - 4.0, theme.falling),
        ):
            draw_shape(painter, shape, QRectF(at, line[1] + 0.15 * self.sizes.em, side, side), QColor(colour))
        inner = (line[0] + 1.1 * self.sizes.em, line[1], line[2] - 2.2 * self.sizes.em, line[3])
        self._text(painter, inner, LEFT, "rising", theme.ink, bold=True)
        self._text(painter, inner, RIGHT, "falling", theme.ink, bold=True)
        self._text(painter, line, CENTRE, self.view.unit, theme.faint)

    def _rails(self, painter: QPainter) -> None:
        theme = self.theme
        top, bottom = self.frame.top - self.sizes.em, self.frame.bottom + self.sizes.em
        if not self.view.places:
            room = (self.frame.left, self.frame.top, self.frame.right - self.frame.left, 2.0 * self.sizes.em)
            self._text(painter, room, CENTRE, NO_COURSE, theme.faint)
            return
        for x, colour in (
            (self.frame.middle - self.frame.half_axis, theme.rising),
            (self.frame.middle + self.frame.half_axis, theme.falling),
        ):
            painter.setPen(QPen(blended(theme.panel, colour, 0.75), 2.0))
            painter.drawLine(QPointF(x, top), QPointF(x, bottom))

    def _block(self, painter: QPainter, block: Block) -> None:
        theme, place = self.theme, block.place
        rising = place.direction == RISING
        colour = QColor(theme.rising if rising else theme.falling)
        left, top, width, tall = block.box
        around = QRectF(left - 3.0, top - 2.0, width + 6.0, tall + 4.0)
        if place.here and block.shows != DASH:
            rounded(painter, around, blended(theme.panel, theme.accent, 0.16))
        elif place.next and block.shows != DASH:
            painter.setPen(QPen(QColor(theme.accent), 1.2, Qt.PenStyle.DashLine))
            painter.drawRoundedRect(around, 4.0, 4.0)
        start = left + width if rising else left  # the end of the rung towards its rail
        far = left if rising else left + width
        if block.shows == DASH:
            far = block.rail_x + (-1.0 if rising else 1.0) * 0.7 * self.sizes.em
            start = far
        pen = QPen(colour, 1.4)
        if place.filling == "planned":
            pen.setDashPattern([3.0, 2.5])
            if block.shows != DASH:
                far = start
        painter.setPen(pen)
        painter.drawPolyline(
            [QPointF(block.rail_x, block.rail_y), QPointF(start, block.line_y), QPointF(far, block.line_y)]
        )
        panel = QColor(theme.panel)
        if place.filling != "planned":
            side = 0.78 * self.sizes.em
            box = QRectF(block.rail_x - 0.5 * side, block.rail_y - 0.5 * side, side, side)
            shape = MARKERS[place.filling][0 if rising else 1]
            if shape == "cross":  # so that the rail does not run through it
                rounded(painter, box, panel, 2.0)
            draw_shape(painter, shape, box, colour, panel)
        quiet = place.filling == "planned" and not place.next
        for label, label_box in block.labels:
            is_word = label.startswith(place.word)
            faint = quiet or (is_word and not place.here)
            self._text(painter, label_box, LEFT, label, theme.faint if faint else theme.ink)
        for drawn in block.taps:
            self._tap(painter, drawn)

    def _tap(self, painter: QPainter, drawn: TapBox) -> None:
        theme = self.theme
        box = QRectF(*drawn.box)
        number = drawn.tap.tap
        around = box.adjusted(-2.5, -2.5, 2.5, 2.5)
        chosen = number == self.chosen
        rounded(painter, box.adjusted(-1.0, -1.0, 1.0, 1.0), QColor(theme.panel), 0.5 * box.width())
        if chosen:
            rounded(painter, around, QColor(theme.accent), 3.0)
        ink = QColor(theme.accent_ink if chosen else theme.ink)
        ground = QColor(theme.accent if chosen else theme.panel)
        draw_shape(painter, drawn.tap.shape, box, ink, ground)
        if number == self.focus:
            focus_ring(painter, around, QColor(theme.ink), 3.0)

    def _ticks(self, painter: QPainter) -> None:
        if not self.view.places:
            return
        many = min(12, max(2, int((self.frame.bottom - self.frame.top) / (2.6 * self.sizes.em))))
        pointer = self.view.pointer
        for value in ticks(self.view.low, self.view.high, many):
            y = self.frame.y(self.view, value)
            if pointer is not None and abs(y - self.frame.y(self.view, pointer)) < 1.3 * self.sizes.small:
                continue
            box = (
                self.frame.middle - self.frame.half_axis,
                y - 0.5 * self.sizes.small,
                2.0 * self.frame.half_axis,
                self.sizes.small,
            )
            self._text(painter, box, CENTRE, f"{value:g}", self.theme.faint)

    def _pointer(self, painter: QPainter) -> None:
        """Where the run is: the number on the axis, with an arrow to the rail it is on."""
        view, theme = self.view, self.theme
        if view.pointer is None:
            return
        y = self.frame.y(view, view.pointer)
        half_tall = 0.5 * self.sizes.small + 1.0
        half_wide = 0.5 * QFontMetricsF(sized(self.font, SMALL)).horizontalAdvance(view.pointer_words) + 2.0
        tip = self.frame.half_axis - half_wide - 2.0
        x = self.frame.middle
        corners = [
            (-half_wide, -half_tall),
            (half_wide, -half_tall),
            (half_wide, half_tall),
            (-half_wide, half_tall),
        ]
        if view.pointer < view.low:
            corners.insert(3, (0.0, half_tall + tip))
        elif view.pointer > view.high:
            corners.insert(1, (0.0, -half_tall - tip))
        elif view.pointer_direction == RISING:
            x += 0.5 * tip
            corners.append((-half_wide - tip, 0.0))
        else:
            x -= 0.5 * tip
            corners.insert(2, (half_wide + tip, 0.0))
        accent = QColor(theme.accent)
        painter.setPen(
            QPen(accent, 2.0, Qt.PenStyle.SolidLine, Qt.PenCapStyle.RoundCap, Qt.PenJoinStyle.RoundJoin)
        )
        painter.setBrush(accent)
        painter.drawPolygon([QPointF(x + dx, y + dy) for dx, dy in corners])
        painter.setBrush(Qt.BrushStyle.NoBrush)
        box = (x - half_wide, y - half_tall, 2.0 * half_wide, 2.0 * half_tall)
        self._text(painter, box, CENTRE, view.pointer_words, theme.accent_ink)

    def _foot(self, painter: QPainter, legend: list[tuple[str, str, Box]], next_box: Box) -> None:
        theme = self.theme
        if self.view.next_words:
            metrics = QFontMetricsF(sized(self.font, SMALL))
            shown = metrics.elidedText(self.view.next_words, Qt.TextElideMode.ElideRight, next_box[2])
            self._text(painter, next_box, LEFT, shown, theme.ink)
        for shape, word, (left, y, width, tall) in legend:
            side = self.sizes.tap
            draw_shape(painter, shape, QRectF(left, y + 0.5 * (tall - side), side, side), QColor(theme.faint))
            self._text(painter, (left + 1.5 * side, y, width - 1.5 * side, tall), LEFT, word, theme.faint)
