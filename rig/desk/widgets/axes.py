"""What stands around and behind what is drawn: quiet scales, light lines, captions, a word on a patch.

Written for speed: no grid but for a few lines of one pixel, and nothing is drawn again while it stays as it is.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pyqtgraph as pg
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, QSizeF, Qt
from PySide6.QtGui import QBrush, QColor, QFont, QFontMetricsF, QPainter, QPen
from PySide6.QtWidgets import QStyleOptionGraphicsItem, QWidget

from rig.desk.theme import Theme

Values = NDArray[np.float64]
Ticks = Sequence[tuple[float, str]]
Style = Qt.PenStyle

#: Share of the widget's font that scales are written in.
SCALE_FONT = 0.88


def pen(colour: str, width: float = 1.0, style: Style = Style.SolidLine) -> QPen:
    """A pen of so many pixels, whatever the range."""
    made = QPen(QColor(colour), width, style)
    made.setCosmetic(True)
    return made


def dashed(colour: str, pattern: Sequence[float], width: float = 1.0) -> QPen:
    """A pen of dashes and gaps, in widths."""
    made = pen(colour, width)
    made.setDashPattern(list(pattern))
    return made


def wash(colour: str, share: float) -> QBrush:
    """A translucent filling."""
    made = QColor(colour)
    made.setAlphaF(share)
    return QBrush(made)


def in_pixels(made: QPen) -> QPen:
    """The same pen for what is drawn in the widget's own pixels: as wide on a fine screen as on any other."""
    made.setCosmetic(False)
    return made


def scale_font(font: QFont) -> QFont:
    made = QFont(font)
    if font.pointSizeF() > 0.0:
        made.setPointSizeF(SCALE_FONT * font.pointSizeF())
    else:
        made.setPixelSize(max(round(SCALE_FONT * font.pixelSize()), 1))
    return made


class Scale(pg.GraphicsWidget):
    """Numbers along one side of a view, and what they are in.

    At the left side the name and its unit stand in a column of their own if there is room for one; below and above,
    the name stands in the line under or over the numbers.
    """

    def __init__(self, view: pg.ViewBox, side: str) -> None:
        super().__init__()
        self._view = view
        self._side = side
        self._ticks: Ticks = ()
        self._name = self._unit = ""
        self._names_px = 0.0
        self._font = QFont()
        self._theme: Theme | None = None

    @property
    def ticks(self) -> Ticks:
        return self._ticks

    @property
    def name(self) -> str:
        """What is on the scale, with its unit."""
        return f"{self._name} ({self._unit})" if self._unit else self._name

    def set_name(self, name: str, unit: str) -> None:
        self._name, self._unit = name, unit
        self.update()

    def set_ticks(self, made: Ticks) -> None:
        if made != self._ticks:
            self._ticks = made
            self.update()

    def set_look(self, theme: Theme, font: QFont, names_px: float = 0.0, numbers: str = "−00.0") -> None:
        """Colours, sizes; `names_px` is the width of a left scale's column of names."""
        self._theme, self._font, self._names_px = theme, font, names_px
        metrics = QFontMetricsF(scale_font(font))
        if self._side == "left":
            self.setPreferredHeight(0.0)  # as high as its view, whatever that is
            self.setFixedWidth(names_px + metrics.horizontalAdvance(numbers) + 0.3 * metrics.height())
        else:
            lines = 2.0 if self._name else 1.0
            self.setFixedHeight(lines * metrics.height() + 0.35 * metrics.height())
        self.update()

    def paint(
        self, painter: QPainter, option: QStyleOptionGraphicsItem, widget: QWidget | None = None
    ) -> None:
        if self._theme is None:
            return
        painter.setFont(scale_font(self._font))
        if self._side == "left":
            self._paint_left(painter, self._theme)
        else:
            self._paint_flat(painter, self._theme)

    def _paint_left(self, painter: QPainter, theme: Theme) -> None:
        size, metrics = self.size(), QFontMetricsF(painter.font())
        low, high = self._view.viewRange()[1]
        painter.setPen(QColor(theme.faint))
        line, end = metrics.height(), size.width()
        before = float("inf")
        for value, text in self._ticks:
            y = size.height() * (1.0 - (value - low) / (high - low)) if high > low else 0.0
            top = min(max(y - 0.5 * line, 0.0), size.height() - line)
            if top + line <= before + 0.15 * line:  # from the bottom up, without touching
                painter.drawText(QRectF(0.0, top, end, line), Qt.AlignmentFlag.AlignRight, text)
                before = top
        if self._names_px <= 0.0:
            return
        painter.setFont(self._font)
        metrics = QFontMetricsF(self._font)
        line = metrics.height()
        two = size.height() >= 2.0 * line
        top = 0.5 * (size.height() - (2.0 if two else 1.0) * line)
        painter.setPen(QColor(theme.ink))
        name = self._name if two else self.in_one_line()
        painter.drawText(QRectF(0.0, top, self._names_px, line), Qt.AlignmentFlag.AlignLeft, name)
        if two:
            painter.setPen(QColor(theme.faint))
            painter.drawText(
                QRectF(0.0, top + line, self._names_px, line), Qt.AlignmentFlag.AlignLeft, self._unit
            )

    def in_one_line(self) -> str:
        """Name and unit for a column too low for two lines; the name is shortened, never its unit."""
        metrics, unit = QFontMetricsF(self._font), f" {self._unit}" if self._unit else ""
        room = self._names_px - metrics.horizontalAdvance(unit)
        return metrics.elidedText(self._name, Qt.TextElideMode.ElideRight, room) + unit

    def _paint_flat(self, painter: QPainter, theme: Theme) -> None:
        size, metrics = self.size(), QFontMetricsF(painter.font())
        low, high = self._view.viewRange()[0]
        line, above = metrics.height(), self._side == "top"
        painter.setPen(QColor(theme.faint))
        numbers_top = size.height() - 1.15 * line if above else 0.15 * line
        reached = 0.0
        for value, text in self._ticks:
            x = size.width() * (value - low) / (high - low) if high > low else 0.0
            wide = metrics.horizontalAdvance(text)
            if x < -0.5 or x > size.width() + 0.5:
                continue
            start = min(max(x - 0.5 * wide, 0.0), size.width() - wide)
            if start >= reached:
                painter.drawText(QPointF(start, numbers_top + metrics.ascent()), text)
                reached = start + wide + 0.5 * line
        name_top = 0.0 if above else 1.15 * line
        side = Qt.AlignmentFlag.AlignRight if above else Qt.AlignmentFlag.AlignHCenter
        painter.drawText(QRectF(0.0, name_top, size.width(), line), side, self.name)


class LightLines(pg.GraphicsObject):
    """A few lines of one pixel across a view, behind everything, and words at their ends.

    `across` are (value, words) of quiet lines, such as end stops: dashed, named at the right end. `marks` are moments:
    dotted, named at the top.
    """

    def __init__(self, view: pg.ViewBox) -> None:
        super().__init__(view)
        self._view = view
        self.setZValue(-100.0)
        self.level: Ticks = ()
        self.upright: Ticks = ()
        self.across: Ticks = ()
        self.marks: Ticks = ()
        self._font = QFont()
        self._theme: Theme | None = None

    def set_look(self, theme: Theme, font: QFont) -> None:
        self._theme, self._font = theme, scale_font(font)
        self.update()

    def set_lines(self, level: Ticks, upright: Ticks) -> None:
        if level != self.level or upright != self.upright:
            self.level, self.upright = level, upright
            self.update()

    def boundingRect(self) -> QRectF:
        return QRectF(QPointF(0.0, 0.0), QSizeF(self._view.size()))

    def paint(
        self, painter: QPainter, option: QStyleOptionGraphicsItem, widget: QWidget | None = None
    ) -> None:
        theme = self._theme
        if theme is None:
            return
        wide, tall = self._view.width(), self._view.height()
        (left, right), (low, high) = self._view.viewRange()
        painter.setPen(pen(theme.rule))
        for value, _ in self.level:
            y = round(tall * (1.0 - (value - low) / (high - low)))
            painter.drawLine(QPointF(0.0, y), QPointF(wide, y))
        for value, _ in self.upright:
            x = round(wide * (value - left) / (right - left))
            painter.drawLine(QPointF(x, 0.0), QPointF(x, tall))
        painter.setFont(self._font)
        metrics = QFontMetricsF(self._font)
        for value, words in self.across:
            y = round(tall * (1.0 - (value - low) / (high - low)))
            if not 0.0 <= y <= tall:
                continue
            painter.setPen(in_pixels(dashed(theme.faint, (6.0, 4.0))))
            painter.drawLine(QPointF(0.0, y), QPointF(wide, y))
            below = y + metrics.height() <= tall
            place = QRectF(0.0, y if below else y - metrics.height(), wide - 4.0, metrics.height())
            painter.setPen(QColor(theme.faint))
            painter.drawText(place, Qt.AlignmentFlag.AlignRight, words)
        for value, words in self.marks:
            x = round(wide * (value - left) / (right - left))
            if 0.0 <= x <= wide:
                painter.setPen(in_pixels(dashed(theme.ink, (1.5, 2.5))))
                painter.drawLine(QPointF(x, 0.0), QPointF(x, tall))
                painter.setPen(QColor(theme.faint))
                painter.drawText(QPointF(x + 3.0, metrics.ascent()), words)


class Caption(pg.GraphicsWidget):
    """A line of text over a view: what is drawn in it, and its unit; at the right end what else there is to say."""

    def __init__(self, text: str, right: str = "") -> None:
        super().__init__()
        self.text, self.right = text, right
        self._font = QFont()
        self._theme: Theme | None = None

    def say(self, text: str, right: str = "") -> None:
        if (text, right) != (self.text, self.right):
            self.text, self.right = text, right
            self.update()

    def set_look(self, theme: Theme, font: QFont) -> None:
        self._theme, self._font = theme, scale_font(font)
        self.setFixedHeight(1.1 * QFontMetricsF(self._font).height())
        self.update()

    def paint(
        self, painter: QPainter, option: QStyleOptionGraphicsItem, widget: QWidget | None = None
    ) -> None:
        if self._theme is not None:
            painter.setFont(self._font)
            painter.setPen(QColor(self._theme.faint))
            painter.drawText(self.boundingRect(), Qt.AlignmentFlag.AlignLeft, self.text)
            painter.drawText(self.boundingRect(), Qt.AlignmentFlag.AlignRight, self.right)


class Words(pg.GraphicsObject):
    """A word or two on a patch in the middle of a view: what is not to be taken from the picture."""

    def __init__(self, view: pg.ViewBox) -> None:
        super().__init__(view)
        self._view = view
        self.setZValue(100.0)
        self.setVisible(False)
        self.text = ""
        self._font = QFont()
        self._theme: Theme | None = None

    def set_look(self, theme: Theme, font: QFont) -> None:
        self._theme, self._font = theme, font
        self.update()

    def say(self, text: str) -> None:
        if text != self.text:
            self.text = text
            self.setVisible(bool(text))
            self.update()

    def boundingRect(self) -> QRectF:
        return QRectF(QPointF(0.0, 0.0), QSizeF(self._view.size()))

    def paint(
        self, painter: QPainter, option: QStyleOptionGraphicsItem, widget: QWidget | None = None
    ) -> None:
        if self._theme is None or not self.text:
            return
        metrics = QFontMetricsF(self._font)
        pad = 0.5 * metrics.height()
        room = self.boundingRect().adjusted(pad, 0.0, -pad, 0.0)
        flags = int(Qt.AlignmentFlag.AlignCenter) | int(Qt.TextFlag.TextWordWrap)
        patch = metrics.boundingRect(room, flags, self.text)
        patch = patch.adjusted(-pad, -0.3 * pad, pad, 0.3 * pad).intersected(self.boundingRect())
        painter.setPen(pen(self._theme.rule))
        painter.setBrush(QColor(self._theme.panel))
        painter.drawRect(patch)
        painter.setPen(QColor(self._theme.ink))
        painter.setFont(self._font)
        painter.drawText(patch, flags, self.text)
