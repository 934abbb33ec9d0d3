"""The halt control: the largest thing on the screen. One press takes the drive away; nothing is asked."""

from __future__ import annotations

from PySide6.QtCore import QPointF, QRectF, QSize, Qt, Signal
from PySide6.QtGui import (
    QColor,
    QFont,
    QFontMetricsF,
    QKeyEvent,
    QMouseEvent,
    QPainter,
    QPaintEvent,
    QPen,
    QResizeEvent,
)
from PySide6.QtWidgets import QAbstractButton, QSizePolicy, QWidget

from rig.desk.model.run_model import RunModel
from rig.desk.theme import Theme
from rig.desk.widgets.shapes import blended, focus_ring, rounded, sized

WORD = "HALT"
DOES = "takes the drive away"
OFF = "drive is off"
STILL_TURNING = "drive is off, crank still turns"
KEYS = "Esc or F12"
FOOT = "Software halt. Not a safety-rated stop."
WRAP = Qt.AlignmentFlag.AlignHCenter | Qt.AlignmentFlag.AlignTop | Qt.TextFlag.TextWordWrap


class HaltStrip(QAbstractButton):
    """Stands at the left edge, full height. `halted` comes with the press, not with the release.

    The window gives it the keys, which work whatever has the focus.
    """

    halted = Signal()

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = theme
        self._live = False
        self._told = OFF
        self.setText(WORD)
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setCursor(Qt.CursorShape.PointingHandCursor)
        self.setSizePolicy(QSizePolicy.Policy.Fixed, QSizePolicy.Policy.Expanding)
        self.setAccessibleName("Halt")
        self._describe()
        # Also what a screen reader or a program presses.
        self.pressed.connect(self.halted)

    @property
    def live(self) -> bool:
        """Whether the drive may be on."""
        return self._live

    @property
    def told(self) -> str:
        """What stands under the word."""
        return self._told

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        self.update()

    def refresh(self, model: RunModel) -> None:
        told = DOES if model.may_be_driven else STILL_TURNING if model.phase == "turning" else OFF
        if told != self._told:
            self._told, self._live = told, model.may_be_driven
            self._describe()
            self.update()

    def _describe(self) -> None:
        self.setAccessibleDescription(f"{self._told}. {KEYS}. {FOOT}")
        self.setToolTip(f"{self._told}\n{KEYS} do the same, whatever has the focus")

    # -- pressing --------------------------------------------------------------------------------------

    def mousePressEvent(self, event: QMouseEvent) -> None:
        if event.button() == Qt.MouseButton.LeftButton:
            super().mousePressEvent(event)
        else:  # whichever button was under the finger
            self.halted.emit()
            event.accept()

    def mouseDoubleClickEvent(self, event: QMouseEvent) -> None:
        self.mousePressEvent(event)

    def hitButton(self, pos: object) -> bool:
        return True

    def keyPressEvent(self, event: QKeyEvent) -> None:
        if event.key() in (Qt.Key.Key_Return, Qt.Key.Key_Enter):
            if not event.isAutoRepeat():
                self.halted.emit()
            event.accept()
        else:
            super().keyPressEvent(event)

    # -- size and drawing ------------------------------------------------------------------------------

    def sizeHint(self) -> QSize:
        em = self.fontMetrics().height()
        # Wider on a tall screen, so that the letters grow with it.
        wide = min(max(9.8 * em, 0.17 * self.height()), 15.0 * em)
        return QSize(round(wide), 24 * em)

    def resizeEvent(self, event: QResizeEvent) -> None:
        if event.size().height() != event.oldSize().height():
            self.updateGeometry()

    def minimumSizeHint(self) -> QSize:
        em = self.fontMetrics().height()
        return QSize(round(8.5 * em), 18 * em)

    def parts(self) -> dict[str, QRectF]:
        """Where each text is drawn: letters "0" to "3", "told", "keys" and "foot"."""
        em = float(self.fontMetrics().height())
        gap = 0.5 * em
        edge = 0.8 * em
        inner = QRectF(self.rect()).adjusted(edge, edge, -edge, -edge)
        heights = {
            name: self._height(text, font, inner.width())
            for name, text, font in (
                ("told", self._longest(), self._told_font()),
                ("keys", KEYS, self._keys_font()),
                ("foot", FOOT, self._foot_font()),
            )
        }
        foot = QRectF(inner.left(), inner.bottom() - heights["foot"], inner.width(), heights["foot"])
        below = heights["told"] + gap + heights["keys"] + 2.0 * gap
        room = QRectF(inner.left(), inner.top(), inner.width(), foot.top() - gap - below - inner.top())
        tall = min(room.height() / len(WORD), 1.12 * inner.width())
        top = room.top() + max(0.0, 0.5 * (room.height() - len(WORD) * tall))
        made = {str(at): QRectF(room.left(), top + at * tall, room.width(), tall) for at in range(len(WORD))}
        told_top = top + len(WORD) * tall + gap
        made["told"] = QRectF(inner.left(), told_top, inner.width(), heights["told"])
        made["keys"] = QRectF(inner.left(), made["told"].bottom() + gap, inner.width(), heights["keys"])
        made["foot"] = foot
        return made

    def _longest(self) -> str:
        """The text the room is kept for, so that nothing moves when the state changes."""
        return STILL_TURNING

    def _told_font(self) -> QFont:
        return sized(self.font(), 1.1, bold=True)

    def _keys_font(self) -> QFont:
        return sized(self.font(), 1.0)

    def _foot_font(self) -> QFont:
        return sized(self.font(), 0.8)

    @staticmethod
    def _height(text: str, font: QFont, width: float) -> float:
        return QFontMetricsF(font).boundingRect(QRectF(0.0, 0.0, width, 1e4), int(WRAP), text).height() + 1.0

    def letter_font(self, parts: dict[str, QRectF]) -> QFont:
        """The largest font whose letters fit their fields."""
        font = QFont(self.font())
        font.setBold(True)
        font.setPixelSize(100)
        metrics = QFontMetricsF(font)
        widest = max(metrics.horizontalAdvance(letter) for letter in WORD)
        field = parts["0"]
        factor = min(field.width() / widest, 0.86 * field.height() / metrics.capHeight())
        font.setPixelSize(max(12, int(100.0 * factor)))
        return font

    def paintEvent(self, event: QPaintEvent) -> None:
        theme = self._theme
        painter = QPainter(self)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        inset = QRectF(self.rect()).adjusted(2.0, 2.0, -2.0, -2.0)
        if self._live:
            ground, ink = QColor(theme.halt), QColor(theme.halt_ink)
            if self.isDown():
                ground = blended(theme.halt, theme.halt_ink, 0.25)
            elif self.underMouse():
                ground = blended(theme.halt, theme.halt_ink, 0.10)
            rounded(painter, inset, ground)
        else:
            ground, ink = QColor(theme.panel), QColor(theme.faint)
            rounded(painter, inset, blended(theme.panel, theme.raised, 1.0 if self.isDown() else 0.0))
            painter.setPen(QPen(QColor(theme.faint), 1.5))
            painter.drawRoundedRect(inset, 4.0, 4.0)
        parts = self.parts()
        painter.setPen(ink)
        self._letters(painter, parts)
        for name, text, font in (
            ("told", self._told, self._told_font()),
            ("keys", KEYS, self._keys_font()),
            ("foot", FOOT, self._foot_font()),
        ):
            painter.setFont(font)
            painter.drawText(parts[name], int(WRAP), text)
        foot = parts["foot"]
        painter.setPen(QPen(ink, 1.0))
        above = foot.top() - 0.4 * self.fontMetrics().height()
        painter.drawLine(QPointF(foot.left(), above), QPointF(foot.right(), above))
        if self.hasFocus():
            focus_ring(painter, inset.adjusted(5.0, 5.0, -5.0, -5.0), ink)
        painter.end()

    def _letters(self, painter: QPainter, parts: dict[str, QRectF]) -> None:
        """The word from top to bottom, each letter centred on its capital's height."""
        font = self.letter_font(parts)
        metrics = QFontMetricsF(font)
        painter.setFont(font)
        for at, letter in enumerate(WORD):
            field = parts[str(at)]
            x = field.center().x() - 0.5 * metrics.horizontalAdvance(letter)
            painter.drawText(QPointF(x, field.center().y() + 0.5 * metrics.capHeight()), letter)


__all__ = ["HaltStrip"]
