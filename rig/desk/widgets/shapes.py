"""Small drawn shapes that stand beside words, and what several parts draw with."""

from __future__ import annotations

import math
from collections.abc import Callable

from PySide6.QtCore import QPointF, QRectF, QSize, Qt
from PySide6.QtGui import (
    QBrush,
    QColor,
    QFont,
    QFontMetrics,
    QPainter,
    QPainterPath,
    QPaintEvent,
    QPen,
    QPolygonF,
)
from PySide6.QtWidgets import QLabel, QSizePolicy, QWidget

from rig.desk.theme import Theme

Draw = Callable[[QPainter, QRectF, QPen, QColor, QColor], None]


def blended(one: str, other: str, share: float) -> QColor:
    """`share` of `other` in `one`, both #rrggbb."""
    a, b = QColor(one), QColor(other)
    mixed = (
        round(x + share * (y - x))
        for x, y in ((a.red(), b.red()), (a.green(), b.green()), (a.blue(), b.blue()))
    )
    return QColor(*mixed)


def sized(font: QFont, factor: float, bold: bool = False) -> QFont:
    """A font `factor` times as large; also for fonts set in pixels."""
    made = QFont(font)
    if font.pointSizeF() > 0.0:
        made.setPointSizeF(font.pointSizeF() * factor)
    else:
        made.setPixelSize(max(1, round(font.pixelSize() * factor)))
    made.setBold(bold)
    return made


def _triangle(rect: QRectF, quarter: int) -> QPolygonF:
    """A triangle that points right, up, left or down (0 to 3)."""
    middle, radius = rect.center(), 0.5 * rect.width()
    angles = [quarter * math.pi / 2.0 + turn for turn in (0.0, 2.1, -2.1)]
    return QPolygonF(
        [QPointF(middle.x() + radius * math.cos(a), middle.y() - radius * math.sin(a)) for a in angles]
    )


def _polygon(quarter: int, filled: bool) -> Draw:
    def draw(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
        painter.setPen(pen)
        painter.setBrush(colour if filled else ground)
        painter.drawPolygon(_triangle(rect, quarter))

    return draw


def _disc(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    painter.setPen(pen)
    painter.setBrush(colour)
    painter.drawEllipse(rect)


def _ring(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    _disc(painter, rect, pen, ground, ground)


def _dotted(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    dotted = QPen(pen)
    dotted.setDashPattern([1.2, 1.6])
    _disc(painter, rect, dotted, ground, ground)


def _half(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    _ring(painter, rect, pen, colour, ground)
    painter.setBrush(colour)
    painter.drawPie(rect, 90 * 16, 180 * 16)


def _struck(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    _ring(painter, rect, pen, colour, ground)
    painter.drawLine(rect.bottomLeft(), rect.topRight())


def _cross(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    thick = QPen(pen)
    thick.setWidthF(1.5 * pen.widthF())
    inner = rect.adjusted(
        0.08 * rect.width(), 0.08 * rect.width(), -0.08 * rect.width(), -0.08 * rect.width()
    )
    painter.setPen(thick)
    painter.drawLine(inner.topLeft(), inner.bottomRight())
    painter.drawLine(inner.bottomLeft(), inner.topRight())


def _twin(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    """Two strokes side by side: it was struck twice."""
    thick = QPen(pen)
    thick.setWidthF(1.7 * pen.widthF())
    painter.setPen(thick)
    for x in (rect.left() + 0.28 * rect.width(), rect.right() - 0.28 * rect.width()):
        painter.drawLine(QPointF(x, rect.top()), QPointF(x, rect.bottom()))


def _bars(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    """Two level bars: at rest."""
    painter.setPen(Qt.PenStyle.NoPen)
    painter.setBrush(colour)
    thick = 0.28 * rect.height()
    for y in (rect.top() + 0.1 * rect.height(), rect.bottom() - 0.1 * rect.height() - thick):
        painter.drawRect(QRectF(rect.left(), y, rect.width(), thick))


def _square(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    painter.setPen(pen)
    painter.setBrush(colour)
    inset = 0.06 * rect.width()
    painter.drawRect(rect.adjusted(inset, inset, -inset, -inset))


def _turning(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    """Three quarters of a circle with a head: something still goes round."""
    thick = QPen(pen)
    thick.setWidthF(1.4 * pen.widthF())
    painter.setPen(thick)
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.drawArc(rect, 70 * 16, 270 * 16)
    painter.setPen(Qt.PenStyle.NoPen)
    painter.setBrush(colour)
    tip = QRectF(0.0, 0.0, 0.55 * rect.width(), 0.55 * rect.width())
    tip.moveCenter(
        QPointF(rect.center().x() + 0.95 * 0.5 * rect.width(), rect.center().y() - 0.12 * rect.height())
    )
    painter.drawPolygon(_triangle(tip, 1))


def _warning(painter: QPainter, rect: QRectF, pen: QPen, colour: QColor, ground: QColor) -> None:
    """A triangle with a stroke and a dot."""
    _polygon(1, False)(painter, rect, pen, colour, ground)
    x, y = rect.center().x(), rect.center().y()
    painter.drawLine(QPointF(x, y - 0.15 * rect.height()), QPointF(x, y + 0.05 * rect.height()))
    painter.drawPoint(QPointF(x, y + 0.17 * rect.height()))


SHAPES: dict[str, Draw] = {
    "ring": _ring,
    "disc": _disc,
    "dotted": _dotted,
    "half": _half,
    "struck": _struck,
    "cross": _cross,
    "twin": _twin,
    "bars": _bars,
    "square": _square,
    "turning": _turning,
    "warning": _warning,
    "right": _polygon(0, True),
    "right_hollow": _polygon(0, False),
    "up": _polygon(1, True),
    "up_hollow": _polygon(1, False),
    "left": _polygon(2, True),
    "down": _polygon(3, True),
    "down_hollow": _polygon(3, False),
}


def draw_shape(
    painter: QPainter,
    shape: str,
    rect: QRectF,
    colour: QColor,
    ground: QColor | None = None,
) -> None:
    """One of `SHAPES` inside a square; `ground` fills the hollow ones. KeyError for any other name."""
    draw = SHAPES[shape]
    painter.save()
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    width = max(1.2, rect.width() / 8.0)
    pen = QPen(colour, width, Qt.PenStyle.SolidLine, Qt.PenCapStyle.RoundCap, Qt.PenJoinStyle.RoundJoin)
    inset = 0.5 * width
    inner = rect.adjusted(inset, inset, -inset, -inset)
    draw(painter, inner, pen, colour, ground if ground is not None else QColor(Qt.GlobalColor.transparent))
    painter.restore()


def focus_ring(painter: QPainter, rect: QRectF, colour: QColor, radius: float = 4.0) -> None:
    """The ring that tells what has the focus: 2 pixels, never a change of colour alone."""
    painter.save()
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.setPen(QPen(colour, 2.0))
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.drawRoundedRect(rect, radius, radius)
    painter.restore()


def rounded(painter: QPainter, rect: QRectF, colour: QColor, radius: float = 4.0) -> None:
    """A filled rounded rectangle."""
    path = QPainterPath()
    path.addRoundedRect(rect, radius, radius)
    painter.save()
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.fillPath(path, QBrush(colour))
    painter.restore()


class ShapeMark(QWidget):
    """A shape beside a word, as high as the letters. It says nothing to a screen reader: the word does."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._shape = "ring"
        self._colour = QColor(theme.ink)
        self.setSizePolicy(QSizePolicy.Policy.Fixed, QSizePolicy.Policy.Fixed)

    @property
    def shape(self) -> str:
        return self._shape

    def show_shape(self, shape: str, colour: str) -> None:
        """Another shape or colour."""
        wanted = QColor(colour)
        if (shape, wanted) != (self._shape, self._colour):
            self._shape, self._colour = shape, wanted
            self.update()

    def sizeHint(self) -> QSize:
        side = QFontMetrics(self.font()).capHeight() + 4
        return QSize(side, side)

    def paintEvent(self, event: QPaintEvent) -> None:
        painter = QPainter(self)
        side = min(self.width(), self.height()) - 2.0
        rect = QRectF(0.5 * (self.width() - side), 0.5 * (self.height() - side), side, side)
        draw_shape(painter, self._shape, rect, self._colour)
        painter.end()


class ElidedLabel(QLabel):
    """A label of one line that shortens its text to its width and then tells all of it in a tool tip."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._text = ""
        self._hint = ""
        self.setTextFormat(Qt.TextFormat.PlainText)
        self.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)

    @property
    def full_text(self) -> str:
        return self._text

    def tell(self, text: str, hint: str = "") -> None:
        """Show a text; `hint` adds to the tool tip."""
        if (text, hint) != (self._text, self._hint):
            self._text, self._hint = text, hint
            self.setAccessibleName(text)
            self._fit()

    def resizeEvent(self, event: object) -> None:
        self._fit()

    def changeEvent(self, event: object) -> None:
        super().changeEvent(event)  # type: ignore[arg-type]
        if hasattr(self, "_text"):
            self._fit()

    def _fit(self) -> None:
        width = max(0, self.contentsRect().width())
        shown = self.fontMetrics().elidedText(self._text, Qt.TextElideMode.ElideRight, width)
        if shown != self.text():
            self.setText(shown)
        tips = [self._text] if shown != self._text else []
        self.setToolTip("\n".join([*tips, *([self._hint] if self._hint else [])]))
