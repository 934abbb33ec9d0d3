"""Why a tap was left out: a row of reasons with digit keys, and a line for other words. Nobody has to answer.

The tap has been left out already when the row comes. A word chosen goes out with the number of its tap, so that it is
never taken for another one. What is being typed stays until it is taken or left, also when the row would have gone.
"""

from __future__ import annotations

from PySide6.QtCore import QEvent, Qt, Signal
from PySide6.QtGui import QAccessible, QAccessibleEvent, QKeyEvent, QKeySequence, QShortcut
from PySide6.QtWidgets import QHBoxLayout, QLineEdit, QPushButton, QWidget

from rig.desk.model.wording import OTHER_WORDS, REASONS
from rig.desk.widgets.shapes import ElidedLabel
from rig.desk.widgets.style import set_kind, set_shown
from rig.run.inputs import MOST_LETTERS, cleaned

TYPED = (Qt.Key.Key_Return, Qt.Key.Key_Enter, Qt.Key.Key_Escape)
HOW = "Enter takes it, an empty line leaves it; Esc leaves it too and halts, as everywhere"


class ReasonLine(QLineEdit):
    """One line of words. While it has the focus, no key of the banner answers for it."""

    taken = Signal()
    left = Signal()

    def event(self, event: QEvent) -> bool:
        override = event.type() == QEvent.Type.ShortcutOverride
        if override and isinstance(event, QKeyEvent) and event.key() in TYPED:
            event.accept()
            return True
        return super().event(event)

    def keyPressEvent(self, event: QKeyEvent) -> None:
        if event.key() not in TYPED:
            super().keyPressEvent(event)
        elif event.key() == Qt.Key.Key_Escape:
            self.left.emit()
        else:
            self.taken.emit()


class ReasonRow(QWidget):
    """Offers reasons for one tap."""

    given = Signal(int, str)  # number of the tap, reason
    changed = Signal()  # it has become empty by itself

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._offered: int | None = None
        self._answered: int | None = None  # no more is asked of this tap
        self._typing: int | None = None
        self.question = ElidedLabel()
        self.buttons: list[QPushButton] = []
        self._shortcuts: list[QShortcut] = []
        self.line = ReasonLine()
        set_kind(self.line, "small")
        self.line.setMaxLength(MOST_LETTERS)
        self.line.setPlaceholderText(HOW)
        self.line.setAccessibleDescription(HOW)
        self.line.taken.connect(self._take)
        self.line.left.connect(self._leave)
        row = QHBoxLayout(self)
        row.setContentsMargins(0, 0, 0, 0)
        row.setSpacing(5)
        row.addWidget(self.question, 1)
        for number, words in enumerate((*REASONS, OTHER_WORDS), 1):
            button = self._button(f"{number} {words}", f"{words} ({number})")
            button.clicked.connect(lambda _=False, words=words: self._choose(words))
            shortcut = QShortcut(QKeySequence(str(number)), button)
            shortcut.setAutoRepeat(False)
            shortcut.activated.connect(button.click)
            self.buttons.append(button)
            self._shortcuts.append(shortcut)
            row.addWidget(button)
        row.addWidget(self.line, 3)
        self.take_button = self._button("Take (Enter)", "take these words")
        self.take_button.clicked.connect(self._take)
        self.leave_button = self._button("Leave", "leave these words")
        self.leave_button.clicked.connect(self._leave)
        row.addWidget(self.take_button)
        row.addWidget(self.leave_button)
        self._show()

    def _button(self, text: str, name: str) -> QPushButton:
        button = QPushButton(text)
        set_kind(button, "small")
        button.setAccessibleName(name)
        # A button that goes when it is clicked would hand the focus on to some other one.
        button.setFocusPolicy(Qt.FocusPolicy.TabFocus)
        return button

    # -- what is asked ---------------------------------------------------------------------------------

    @property
    def tap(self) -> int | None:
        """The tap that is asked about, None while the row is empty."""
        return self._typing if self._typing is not None else self._open_offer

    @property
    def _open_offer(self) -> int | None:
        return None if self._offered == self._answered else self._offered

    def offer(self, tap: int | None) -> None:
        """Ask about a tap; None when nothing is asked any more."""
        self._offered = tap
        if tap is None:
            self._answered = None
        if self._typing not in (None, tap) and not self.line.text():
            self._close()
        self._show()

    def withdraw(self) -> None:
        """Ask nothing, whatever was being typed."""
        self._offered = self._answered = None
        self._close()
        self._show()

    def pass_over(self) -> None:
        """Another tap is being taken back: a digit pressed from now on is not meant for this one."""
        self._answered = self._offered
        self._show()

    def set_on_accent(self, on: bool) -> None:
        """Whether the ground is the accent's colour."""
        set_kind(self.question, "on_accent" if on else "")

    # -- answers ---------------------------------------------------------------------------------------

    def _choose(self, words: str) -> None:
        if words == OTHER_WORDS:
            self._open()
        else:
            self._give(words)

    def _give(self, words: str) -> None:
        tap = self.tap
        if tap is None:
            return
        if tap == self._offered:
            self._answered = tap
        self._close()
        self._show()
        self.given.emit(tap, words)
        self.changed.emit()

    def _open(self) -> None:
        self._typing = self._open_offer
        self._show()
        self.line.setFocus(Qt.FocusReason.ShortcutFocusReason)

    def _take(self) -> None:
        words = cleaned(self.line.text())
        if words:
            self._give(words)
        else:
            self._leave()

    def _leave(self) -> None:
        self._close()
        self._show()
        self.changed.emit()

    def _close(self) -> None:
        self._typing = None
        self.line.clearFocus()  # before it is hidden: the focus would go to a button
        self.line.clear()

    def _show(self) -> None:
        tap, typing = self.tap, self._typing is not None
        for button, shortcut in zip(self.buttons, self._shortcuts, strict=True):
            set_shown(button, not typing)
            shortcut.setEnabled(tap is not None and not typing)
        for part in (self.line, self.take_button, self.leave_button):
            set_shown(part, typing)
        set_shown(self, tap is not None)
        question = "" if tap is None else f"Tap {tap}: why?"
        if question and question != self.question.full_text:
            self.setAccessibleName(f"why tap {tap} was left out")
            self.line.setAccessibleName(self.accessibleName())
            QAccessible.updateAccessibility(QAccessibleEvent(self, QAccessible.Event.Alert))
        self.question.tell(question)


__all__ = ["ReasonLine", "ReasonRow"]
