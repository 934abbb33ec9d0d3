"""A list to choose from that is made anew whenever it is opened: ports come and go."""

from __future__ import annotations

from PySide6.QtCore import QEvent, Signal
from PySide6.QtGui import QFocusEvent
from PySide6.QtWidgets import QComboBox, QSizePolicy, QWidget


class FreshList(QComboBox):
    """`opening` is emitted before the list is shown, and when it gets the focus: keys choose without opening it."""

    opening = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Fixed)
        self.setMinimumContentsLength(8)

    def showPopup(self) -> None:
        self.opening.emit()
        super().showPopup()

    def focusInEvent(self, event: QFocusEvent) -> None:
        self.opening.emit()
        super().focusInEvent(event)

    def wheelEvent(self, event: QEvent) -> None:
        """A wheel that passes by chooses nothing."""
        event.ignore()

    def fill(self, entries: list[tuple[str, object]], chosen: object) -> None:
        """Show (words, data) entries with the one of `chosen` data selected; `activated` is not emitted."""
        old = [(self.itemText(row), self.itemData(row)) for row in range(self.count())]
        if old != entries:
            self.blockSignals(True)
            self.clear()
            for words, data in entries:
                self.addItem(words, data)
            self.blockSignals(False)
        row = next((row for row, (_, data) in enumerate(entries) if data == chosen), -1)
        if row != self.currentIndex():
            self.blockSignals(True)
            self.setCurrentIndex(row)
            self.blockSignals(False)
