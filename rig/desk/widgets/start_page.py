"""The first page: what Haltere does, the two cautions that matter most, and three ways to go on."""

from __future__ import annotations

from pathlib import Path

from PySide6.QtCore import QEvent, Qt, Signal
from PySide6.QtGui import QShowEvent
from PySide6.QtWidgets import (
    QFrame,
    QHBoxLayout,
    QLabel,
    QListWidget,
    QListWidgetItem,
    QPushButton,
    QScrollArea,
    QSizePolicy,
    QVBoxLayout,
    QWidget,
)

from rig.desk.model.memory import Memory
from rig.desk.theme import Theme
from rig.desk.widgets.shapes import ShapeMark, sized
from rig.desk.widgets.style import set_kind, set_shown

ABOUT = (
    "A flapping mechanism can hold its body upright by its own shaking, with no controller, above a certain drive. "
    "Haltere finds that drive on your bench: it steps the drive up and down, taps the body at every level, measures "
    "how it settles, and tells with intervals where the body begins to hold itself and where it is lost again."
)
CAUTIONS = (
    "The software halt is not a safety-rated stop: have a hardware emergency stop within reach.",
    "Off does not mean stopped: the flywheel coasts for seconds. Wait for standstill before touching.",
)
WIDTH_EM = 44


class StartPage(QWidget):
    """`replay_file(path)` is a recent session that was chosen."""

    try_simulated = Signal()
    prepare = Signal()
    replay = Signal()
    replay_file = Signal(str)

    def __init__(self, theme: Theme, parent: QWidget | None = None, *, memory: Memory | None = None) -> None:
        super().__init__(parent)
        self._theme = theme
        self._memory = memory if memory is not None else Memory()
        self.heading = QLabel("Haltere")
        self.about = _wrapped(ABOUT)
        self.try_button = QPushButton("&Try it on the simulated boom")
        self.try_button.setAccessibleDescription("a run of about a minute and a half; nothing is powered")
        set_kind(self.try_button, "primary")
        self.try_told = _wrapped(
            "Takes about a minute and a half. Nothing is powered, no bench is needed.", "faint"
        )
        self.prepare_button = QPushButton("Prepare a &run …")
        self.prepare_button.setAccessibleDescription("choose a rig file and a protocol, see the dry run, arm")
        self.replay_button = QPushButton("Rep&lay a session …")
        self.replay_button.setAccessibleDescription("watch a stored session again")
        self.marks = [ShapeMark(theme) for _ in CAUTIONS]
        self.recent_label = QLabel("Re&cent sessions")
        set_kind(self.recent_label, "heading")
        self.recent = QListWidget()
        self.recent_label.setBuddy(self.recent)
        self.recent.setAccessibleName("recent sessions")
        self.recent.setAccessibleDescription("Enter replays the session")
        self.recent.setTextElideMode(Qt.TextElideMode.ElideMiddle)
        self.recent.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self._arrange()
        self.try_button.clicked.connect(lambda: self.try_simulated.emit())
        self.prepare_button.clicked.connect(lambda: self.prepare.emit())
        self.replay_button.clicked.connect(lambda: self.replay.emit())
        self.recent.itemActivated.connect(self._choose)
        self.recent.itemClicked.connect(self._choose)
        self.set_theme(theme)
        self.show_recent()

    def _arrange(self) -> None:
        self.card = QFrame()
        set_kind(self.card, "panel")
        column = QVBoxLayout(self.card)
        column.setContentsMargins(36, 28, 36, 28)
        column.setSpacing(12)
        column.addWidget(self.heading)
        column.addWidget(self.about)
        column.addSpacing(8)
        column.addWidget(self.try_button)
        column.addWidget(self.try_told)
        column.addSpacing(4)
        row = QHBoxLayout()
        row.setSpacing(12)
        row.addWidget(self.prepare_button, 1)
        row.addWidget(self.replay_button, 1)
        column.addLayout(row)
        column.addSpacing(8)
        for mark, words in zip(self.marks, CAUTIONS, strict=True):
            line = QHBoxLayout()
            line.setSpacing(8)
            line.addWidget(mark, 0, Qt.AlignmentFlag.AlignTop)
            line.addWidget(_wrapped(words), 1)
            column.addLayout(line)
        column.addSpacing(4)
        column.addWidget(self.recent_label)
        column.addWidget(self.recent)
        self.card.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Maximum)
        inner = QWidget()
        middle = QHBoxLayout()
        middle.addStretch(1)
        middle.addWidget(self.card)
        middle.addStretch(1)
        outer = QVBoxLayout(inner)
        outer.setContentsMargins(16, 16, 16, 16)
        outer.addStretch(2)
        outer.addLayout(middle)
        outer.addStretch(3)
        area = QScrollArea()
        area.setWidgetResizable(True)
        area.setWidget(inner)
        area.setFocusPolicy(Qt.FocusPolicy.NoFocus)
        page = QVBoxLayout(self)
        page.setContentsMargins(0, 0, 0, 0)
        page.addWidget(area)

    # -- recent sessions -------------------------------------------------------------------------------

    def show_recent(self) -> None:
        """The recent sessions that are still there."""
        self.recent.clear()
        for name in self._memory.recent:
            path = Path(name)
            try:
                there = path.is_file()
            except (OSError, ValueError):
                there = False
            if there:
                item = QListWidgetItem(path.name)
                item.setToolTip(str(path))
                item.setData(Qt.ItemDataRole.UserRole, str(path))
                self.recent.addItem(item)
        some = self.recent.count() > 0
        set_shown(self.recent, some)
        set_shown(self.recent_label, some)
        if some:
            rows = min(4, self.recent.count())
            self.recent.setFixedHeight(rows * max(1, self.recent.sizeHintForRow(0)) + 8)

    def _choose(self, item: QListWidgetItem) -> None:
        self.replay_file.emit(str(item.data(Qt.ItemDataRole.UserRole)))

    def showEvent(self, event: QShowEvent) -> None:
        super().showEvent(event)
        self.show_recent()
        self.try_button.setFocus(Qt.FocusReason.OtherFocusReason)

    # -- look ------------------------------------------------------------------------------------------

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        for mark in self.marks:
            mark.show_shape("warning", theme.alert)
        self._fit()

    def _fit(self) -> None:
        height = self.fontMetrics().height()
        self.card.setFixedWidth(round(WIDTH_EM * 0.85 * height))
        self.heading.setFont(sized(self.font(), 1.9, bold=True))
        self.try_button.setFont(sized(self.font(), 1.25, bold=True))
        self.try_button.setMinimumHeight(round(3.2 * height))
        for button in (self.prepare_button, self.replay_button):
            button.setMinimumHeight(round(2.4 * height))

    def changeEvent(self, event: QEvent) -> None:
        super().changeEvent(event)
        if event.type() == QEvent.Type.FontChange and hasattr(self, "card"):
            self._fit()


def _wrapped(words: str, kind: str = "") -> QLabel:
    label = QLabel(words)
    label.setTextFormat(Qt.TextFormat.PlainText)
    label.setWordWrap(True)
    if kind:
        set_kind(label, kind)
    return label
