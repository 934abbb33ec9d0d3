"""Every mistake in the two files as a sentence; Enter or a click goes to its line."""

from __future__ import annotations

from PySide6.QtCore import QRectF, QSize, Qt, Signal
from PySide6.QtGui import QColor, QFont, QIcon, QPainter, QPixmap
from PySide6.QtWidgets import QListWidget, QListWidgetItem, QVBoxLayout, QWidget

from rig.desk.model.checked import Checked, problem_sentence
from rig.desk.model.written_file import PROTOCOL, RIG
from rig.desk.theme import Theme
from rig.desk.widgets.shapes import draw_shape

PLACE = Qt.ItemDataRole.UserRole


class ProblemList(QWidget):
    """`chosen(which, line)`: "rig" or "protocol", line from 1, 0 for the whole file."""

    chosen = Signal(str, int)

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.theme = theme
        self.list = QListWidget()
        self.list.setWordWrap(True)
        self.list.setAccessibleName("mistakes in the files")
        self.list.setAccessibleDescription("Enter goes to the line of a mistake")
        self.list.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self.list.setTextElideMode(Qt.TextElideMode.ElideNone)
        self.list.itemActivated.connect(self._go)
        self.list.itemClicked.connect(self._go)
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.addWidget(self.list)

    def sentences(self) -> list[str]:
        """What is listed, headings included."""
        return [self.list.item(row).text() for row in range(self.list.count())]

    def show_checked(self, checked: Checked, rig_name: str, protocol_name: str) -> None:
        """List the problems of a check, grouped by file."""
        self.list.clear()
        for which, name, found in (
            (RIG, f"Rig file {rig_name}", checked.rig_problems),
            (PROTOCOL, f"Protocol {protocol_name}", checked.protocol_problems),
        ):
            if not found:
                continue
            self._heading(name)
            for problem in found:
                item = QListWidgetItem(self._mark(), problem_sentence(problem))
                item.setData(PLACE, (which, problem.line))
                self.list.addItem(item)
        if checked.untold:
            self._heading(f"and {checked.untold} more")

    def show_sentence(self, sentence: str) -> None:
        """Something that has no line."""
        self.list.clear()
        self.list.addItem(QListWidgetItem(self._mark(), sentence))

    def _heading(self, words: str) -> None:
        item = QListWidgetItem(words)
        font = QFont(self.list.font())
        font.setBold(True)
        item.setFont(font)
        item.setFlags(Qt.ItemFlag.ItemIsEnabled)
        self.list.addItem(item)

    def _place(self, row: int) -> tuple[str, int] | None:
        place = self.list.item(row).data(PLACE)
        return (str(place[0]), int(place[1])) if place is not None else None

    def _go(self, item: QListWidgetItem) -> None:
        place = self._place(self.list.row(item))
        if place is not None:
            self.chosen.emit(*place)

    def _mark(self) -> QIcon:
        """A cross, as in the margin of the editor."""
        side = self.list.fontMetrics().capHeight() + 2
        self.list.setIconSize(QSize(side, side))
        icon = QIcon()
        for mode, colour in (
            (QIcon.Mode.Normal, self.theme.alert),
            (QIcon.Mode.Selected, self.theme.accent_ink),
        ):
            ratio = self.devicePixelRatioF()
            picture = QPixmap(round(side * ratio), round(side * ratio))
            picture.setDevicePixelRatio(ratio)
            picture.fill(Qt.GlobalColor.transparent)
            painter = QPainter(picture)
            draw_shape(painter, "cross", QRectF(0.0, 0.0, side, side), QColor(colour))
            painter.end()
            icon.addPixmap(picture, mode)
        return icon

    def set_theme(self, theme: Theme) -> None:
        self.theme = theme
        mark = self._mark()
        for row in range(self.list.count()):
            if not self.list.item(row).icon().isNull():
                self.list.item(row).setIcon(mark)
