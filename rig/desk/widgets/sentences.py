"""Sentences below each other, each with a small shape before it where it has one."""

from __future__ import annotations

from collections.abc import Sequence

from PySide6.QtCore import Qt
from PySide6.QtWidgets import QHBoxLayout, QLabel, QSizePolicy, QVBoxLayout, QWidget

from rig.desk.theme import Theme
from rig.desk.widgets.shapes import ShapeMark
from rig.desk.widgets.style import set_kind

#: Words, shape ("": none), kind of the label as in `rig.desk.widgets.style`.
Line = tuple[str, str, str]


class Sentences(QWidget):
    """Shows lines; nothing is made anew while they stay the same."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = theme
        self._lines: list[Line] = []
        self._rows: list[tuple[QWidget, ShapeMark | None]] = []
        self._column = QVBoxLayout(self)
        self._column.setContentsMargins(0, 0, 0, 0)
        self._column.setSpacing(5)
        self.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Minimum)

    def words(self) -> list[str]:
        """The sentences shown."""
        return [words for words, _, _ in self._lines]

    def show_lines(self, lines: Sequence[Line]) -> None:
        if list(lines) == self._lines:
            return
        self._lines = list(lines)
        for row, _ in self._rows:
            self._column.removeWidget(row)
            row.hide()  # not without a parent: its layout may still be about to show it, as a window then
            row.deleteLater()
        self._rows = [self._row(*line) for line in lines]
        for row, _ in self._rows:
            self._column.addWidget(row)
        self.setAccessibleName(" ".join(self.words()))
        self._colour()

    def _row(self, words: str, shape: str, kind: str) -> tuple[QWidget, ShapeMark | None]:
        row = QWidget(self)
        line = QHBoxLayout(row)
        line.setContentsMargins(0, 0, 0, 0)
        line.setSpacing(7)
        mark = None
        if shape:
            mark = ShapeMark(self._theme)
            mark.show_shape(shape, self._theme.ink)
            beside = QVBoxLayout()  # in the middle of the first line
            beside.addSpacing(max(0, (row.fontMetrics().height() - mark.sizeHint().height()) // 2))
            beside.addWidget(mark)
            beside.addStretch(1)
            line.addLayout(beside)
        label = QLabel(words)
        label.setTextFormat(Qt.TextFormat.PlainText)
        label.setWordWrap(True)
        if kind:
            set_kind(label, kind)
        line.addWidget(label, 1)
        return row, mark

    def _colour(self) -> None:
        theme = self._theme
        colours = {"faint": theme.faint, "alert": theme.alert, "alerting": theme.alert, "good": theme.fit}
        for (_, mark), (_, shape, kind) in zip(self._rows, self._lines, strict=True):
            if mark is not None:
                mark.show_shape(shape, colours.get(kind, theme.ink))

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        self._colour()
