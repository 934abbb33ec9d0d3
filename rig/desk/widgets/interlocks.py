"""Each limit with what is left of it; what tripped and what must happen before arming again; the latest notes."""

from __future__ import annotations

from typing import Any

from PySide6.QtCore import QRectF, QSize, Qt
from PySide6.QtGui import QColor, QFont, QFontMetrics, QPainter, QPaintEvent
from PySide6.QtWidgets import QFrame, QLabel, QScrollArea, QSizePolicy, QVBoxLayout, QWidget

from rig.desk.model.run_model import RunModel
from rig.desk.model.wording import NEAR_SHARE, margin_words, opening, trip_words, used_share
from rig.desk.theme import Theme
from rig.desk.widgets.shapes import blended, draw_shape, rounded, sized
from rig.desk.widgets.style import set_kind, set_shown

MOST_NOTES = 30
NO_LIMITS = "no limits are watched while no run is on"
NO_TRIP = "nothing has tripped"


class MarginRow(QWidget):
    """Name, value of limit, a thin bar of the used share with a mark at 80 %, and a word when little is left."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = theme
        self.name, self.told, self.word = "", "", ""
        self._share = 0.0
        self._bar_px = -1
        self.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Fixed)

    @property
    def share(self) -> float:
        return self._share

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        self.update()

    def tell(self, margin: dict[str, Any]) -> None:
        """Show a margin; draws only what has changed."""
        words = margin_words(margin)
        self._share = used_share(margin)
        bar_px = round(min(1.0, self._share) * self.width())
        if words == (self.name, self.told, self.word) and bar_px == self._bar_px:
            return
        self.name, self.told, self.word = words
        self._bar_px = bar_px
        used = f"{100.0 * self._share:.0f} % of the limit is used"
        self.setAccessibleName(f"{self.name} {self.told}")
        self.setAccessibleDescription(f"{self.word}, {used}" if self.word else used)
        self.setToolTip(f"{opening(self.name)}: {self.told}\n{used}")
        self.update()

    def sizeHint(self) -> QSize:
        height = self.fontMetrics().height()
        return QSize(12 * height, round(1.85 * height))

    def texts(self) -> list[tuple[str, QRectF, QFont]]:
        """Name on the left; value, word and shape on the right; with their places and fonts."""
        line = float(self.fontMetrics().height())
        small = sized(self.font(), 0.9)
        metrics = QFontMetrics(small)
        value_wide = metrics.horizontalAdvance(self.told) + 1.0
        right = float(self.width())
        made = [(self.told, QRectF(right - value_wide, 0.0, value_wide, line), small)]
        left = right - value_wide
        if self.word:
            bold = sized(self.font(), 0.9, bold=True)
            wide = QFontMetrics(bold).horizontalAdvance(self.word) + 1.0
            left -= wide + 0.4 * line
            made.append((self.word, QRectF(left, 0.0, wide, line), bold))
            left -= 0.9 * line
        room = max(0.0, left - 0.3 * line)
        name = metrics.elidedText(self.name, Qt.TextElideMode.ElideRight, int(room))
        made.append((name, QRectF(0.0, 0.0, room, line), small))
        return made

    def paintEvent(self, event: QPaintEvent) -> None:
        theme = self._theme
        painter = QPainter(self)
        line = float(self.fontMetrics().height())
        ink, loud = QColor(theme.ink), QColor(theme.alert)
        for text, place, font in self.texts():
            painter.setFont(font)
            painter.setPen(loud if text == self.word else ink if text == self.told else QColor(theme.faint))
            painter.drawText(place, int(Qt.AlignmentFlag.AlignVCenter | Qt.AlignmentFlag.AlignLeft), text)
            if text == self.word:
                side = 0.62 * line
                mark = QRectF(place.left() - side - 3.0, 0.5 * (line - side), side, side)
                draw_shape(painter, "warning", mark, loud)
        thick = max(4.0, 0.25 * line)
        bar = QRectF(0.0, line + 0.18 * line, float(self.width()), thick)
        rounded(painter, bar, QColor(theme.raised), 0.5 * thick)
        used = QRectF(bar)
        used.setWidth(min(1.0, self._share) * bar.width())
        if used.width() >= 1.0:
            colour = loud if self.word else blended(theme.faint, theme.accent, 0.55)
            rounded(painter, used, colour, min(0.5 * thick, 0.5 * used.width()))
        at = round(NEAR_SHARE * bar.width())
        painter.fillRect(QRectF(at, bar.top() - 2.0, 1.0, thick + 4.0), QColor(theme.faint))
        painter.end()


class TripCard(QFrame):
    """One trip: when, what, and what must happen before arming again."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = theme
        self.when, self.what, self.then = QLabel(), QLabel(), QLabel()
        set_kind(self.when, "alert")
        column = QVBoxLayout(self)
        gap = round(0.4 * self.fontMetrics().height())
        column.setContentsMargins(2 * gap, gap, gap, gap)
        column.setSpacing(gap // 2)
        for label in (self.when, self.what, self.then):
            label.setTextFormat(Qt.TextFormat.PlainText)
            label.setWordWrap(True)
            column.addWidget(label)
        self.what.setFont(sized(self.font(), 0.9))
        self.then.setFont(sized(self.font(), 0.9, bold=True))

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        self.update()

    def tell(self, seconds: float, what: str, then: str) -> None:
        self.when.setText(f"Tripped at {seconds:.3f} s")
        self.what.setText(what)
        self.then.setText(then)
        self.setAccessibleName(f"{self.when.text()}: {what}")
        self.setAccessibleDescription(self.then.text())

    def paintEvent(self, event: QPaintEvent) -> None:
        painter = QPainter(self)
        rect = QRectF(self.rect())
        rounded(painter, rect, blended(self._theme.panel, self._theme.alert, 0.10))
        bar = QRectF(rect)
        bar.setWidth(0.25 * self.fontMetrics().height())
        rounded(painter, bar, QColor(self._theme.alert), 2.0)
        painter.end()


class InterlockView(QWidget):
    """Limits above, trips and notes below in a part that scrolls."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = theme
        self._causes: tuple[str, ...] = ()
        self._told: tuple[object, ...] = ()
        self.rows: list[MarginRow] = []
        self.cards: list[TripCard] = []
        self.setAccessibleName("interlocks")
        self._headings = [self._label("Limits", "heading"), self._label("Trips", "heading")]
        self.no_limits = self._label(NO_LIMITS, "faint")
        self.no_trip = self._label(NO_TRIP, "faint")
        self.notes_heading = self._label("Notes, newest first", "heading")
        self.notes = self._label("", "faint")
        self.notes.setFont(sized(self.font(), 0.9))
        gap = round(0.4 * self.fontMetrics().height())
        self._limits = QVBoxLayout()
        self._limits.setSpacing(gap)
        self._trips = QVBoxLayout()
        self._trips.setSpacing(gap)
        inner = QWidget()
        below = QVBoxLayout(inner)
        below.setContentsMargins(0, 0, gap, 0)
        below.setSpacing(gap)
        below.addWidget(self._headings[1])
        below.addWidget(self.no_trip)
        below.addLayout(self._trips)
        below.addSpacing(gap)
        below.addWidget(self.notes_heading)
        below.addWidget(self.notes)
        below.addStretch(1)
        self._scroll = QScrollArea()
        self._scroll.setWidgetResizable(True)
        self._scroll.setFrameShape(QFrame.Shape.NoFrame)
        self._scroll.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self._scroll.setWidget(inner)
        self._scroll.setAccessibleName("trips and notes")
        column = QVBoxLayout(self)
        column.setContentsMargins(2 * gap, gap, gap, gap)
        column.setSpacing(gap)
        column.addWidget(self._headings[0])
        column.addWidget(self.no_limits)
        column.addLayout(self._limits)
        column.addSpacing(gap)
        column.addWidget(self._scroll, 1)
        self._show_notes(())

    @staticmethod
    def _label(text: str, kind: str) -> QLabel:
        label = QLabel(text)
        label.setTextFormat(Qt.TextFormat.PlainText)
        label.setWordWrap(True)
        set_kind(label, kind)
        return label

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        for row in self.rows:
            row.set_theme(theme)
        for card in self.cards:
            card.set_theme(theme)

    def sizeHint(self) -> QSize:
        em = self.fontMetrics().height()
        return QSize(14 * em, 36 * em)

    def minimumSizeHint(self) -> QSize:
        em = self.fontMetrics().height()
        return QSize(round(12.5 * em), 12 * em)

    # -- content ---------------------------------------------------------------------------------------

    def refresh(self, model: RunModel) -> None:
        causes = tuple(str(margin["cause"]) for margin in model.margins)
        if causes != self._causes:
            self._causes = causes
            self._make_rows(len(causes))
        for row, margin in zip(self.rows, model.margins, strict=True):
            row.tell(margin)
        told = (
            len(model.trips),
            len(model.notes),
            model.trips[-1].tick if model.trips else None,
            model.origin_tick,
        )
        if told != self._told:
            self._told = told
            self._show_trips(model)
            self._show_notes([(model.seconds(tick), words) for tick, words in model.notes[-MOST_NOTES:]])

    def _make_rows(self, count: int) -> None:
        while len(self.rows) > count:
            row = self.rows.pop()
            self._limits.removeWidget(row)
            row.deleteLater()
        while len(self.rows) < count:
            self.rows.append(MarginRow(self._theme))
            self._limits.addWidget(self.rows[-1])
        set_shown(self.no_limits, not count)

    def _show_trips(self, model: RunModel) -> None:
        while len(self.cards) > len(model.trips):
            card = self.cards.pop()
            self._trips.removeWidget(card)
            card.deleteLater()
        while len(self.cards) < len(model.trips):
            self.cards.append(TripCard(self._theme))
            self._trips.addWidget(self.cards[-1])
        for card, trip in zip(self.cards, reversed(model.trips), strict=True):
            card.tell(model.seconds(trip.tick), *trip_words(trip))
        set_shown(self.no_trip, not model.trips)

    def _show_notes(self, notes: list[tuple[float, str]] | tuple[()]) -> None:
        lines = [f"{seconds:.1f} s  {words}" for seconds, words in reversed(notes)]
        self.notes.setText("\n".join(lines))
        for part in (self.notes, self.notes_heading):
            set_shown(part, bool(lines))


__all__ = ["InterlockView", "MarginRow", "TripCard"]
