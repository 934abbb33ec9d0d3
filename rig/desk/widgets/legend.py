"""What the lines, bands and marks of a plot are: a small sample and a word each, in as few lines as fit."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from PySide6.QtCore import QPointF, QRectF, QSize
from PySide6.QtGui import QColor, QFontMetricsF, QPainter, QPaintEvent
from PySide6.QtWidgets import QSizePolicy, QWidget

from rig.desk.theme import Theme
from rig.desk.widgets.axes import dashed, in_pixels, pen, scale_font, wash
from rig.desk.widgets.shapes import SHAPES, draw_shape

#: Dashes and gaps of lines that are told apart by them, in widths.
DASHES = {"dash": (5.0, 3.0), "dots": (1.5, 2.5), "dash_dot": (6.0, 2.5, 1.5, 2.5)}
BAND_SHARE, THICK_SHARE = 0.16, 0.42


@dataclass(frozen=True)
class Entry:
    """`sample` is "line", a name of DASHES, "band", "thick" (a band less light) or a name of
    `rig.desk.widgets.shapes.SHAPES`; "band dots" and the like draw both. `colour` is #rrggbb."""

    sample: str
    colour: str
    words: str


class Legend(QWidget):
    """Entries from left to right, on further lines where the width is used up."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.theme = theme
        self.entries: tuple[Entry, ...] = ()
        policy = QSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Minimum)
        policy.setHeightForWidth(True)
        self.setSizePolicy(policy)

    def set_theme(self, theme: Theme) -> None:
        self.theme = theme
        self.update()

    def show_entries(self, entries: Sequence[Entry]) -> None:
        if tuple(entries) != self.entries:
            self.entries = tuple(entries)
            self.setAccessibleName("key: " + ", ".join(entry.words for entry in entries))
            self.updateGeometry()
            self.update()

    def hasHeightForWidth(self) -> bool:
        return True

    def heightForWidth(self, width: int) -> int:
        return self._laid_out(width)[1]

    def sizeHint(self) -> QSize:
        return QSize(200, self.heightForWidth(self.width() or 200))

    def minimumSizeHint(self) -> QSize:
        return QSize(0, self.heightForWidth(max(self.width(), 1)) if self.width() else 0)

    def _laid_out(self, width: int) -> tuple[list[tuple[Entry, QRectF]], int]:
        """Each entry with its place, and the height of all."""
        metrics = QFontMetricsF(scale_font(self.font()))
        line, gap = metrics.height(), metrics.height()
        x = y = 0.0
        placed = []
        for entry in self.entries:
            wide = 1.9 * line + metrics.horizontalAdvance(entry.words)
            if x > 0.0 and x + wide > width:
                x, y = 0.0, y + line
            placed.append((entry, QRectF(x, y, min(wide, width), line)))
            x += wide + 0.7 * gap
        return placed, round(y + line) if placed else 0

    def paintEvent(self, event: QPaintEvent) -> None:
        painter = QPainter(self)
        font = scale_font(self.font())
        metrics = QFontMetricsF(font)
        painter.setFont(font)
        for entry, place in self._laid_out(self.width())[0]:
            sample = QRectF(place.left(), place.top(), 1.6 * place.height(), place.height())
            draw_sample(painter, sample, entry, self.theme)
            painter.setPen(QColor(self.theme.ink))
            painter.drawText(
                QPointF(place.left() + 1.9 * place.height(), place.top() + metrics.ascent()), entry.words
            )
        painter.end()


def draw_sample(painter: QPainter, place: QRectF, entry: Entry, theme: Theme) -> None:
    """One sample in a rectangle."""
    middle = round(place.center().y())
    for kind in entry.sample.split():
        if kind in ("band", "thick"):
            share = BAND_SHARE if kind == "band" else THICK_SHARE
            inner = place.adjusted(0.0, 0.2 * place.height(), 0.0, -0.2 * place.height())
            painter.fillRect(inner, wash(entry.colour, share))
        elif kind in SHAPES:
            side = 0.62 * place.height()
            square = QRectF(0.0, 0.0, side, side)
            square.moveCenter(QPointF(place.center().x(), middle))
            draw_shape(painter, kind, square, QColor(entry.colour), QColor(theme.panel))
        else:
            width = 1.5
            drawn = dashed(entry.colour, DASHES[kind], width) if kind in DASHES else pen(entry.colour, width)
            painter.setPen(in_pixels(drawn))
            painter.drawLine(QPointF(place.left(), middle), QPointF(place.right(), middle))
