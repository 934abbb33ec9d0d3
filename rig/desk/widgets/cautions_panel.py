"""The cautions, and who has acknowledged them: once a shift and rig file, by name."""

from __future__ import annotations

from PySide6.QtCore import QDateTime, Qt, Signal
from PySide6.QtWidgets import (
    QCheckBox,
    QHBoxLayout,
    QLabel,
    QLineEdit,
    QPushButton,
    QScrollArea,
    QVBoxLayout,
    QWidget,
)

from rig.desk.model.acknowledgements import LONGEST_NAME, cleaned
from rig.desk.theme import Theme
from rig.desk.widgets.sentences import Sentences
from rig.desk.widgets.style import set_kind, set_shown
from rig.run.cautions import CAUTIONS, VALID_S, Acknowledgement

SIMULATED = "This run is simulated and nothing is powered. The cautions are those of a real bench."
UNKNOWN = "They are acknowledged once the rig file has no mistakes."


def time_of_day(utc_s: float) -> str:
    """hh:mm on the clock of this computer."""
    return QDateTime.fromSecsSinceEpoch(int(utc_s)).toString("HH:mm")


class CautionsPanel(QWidget):
    """`acknowledged(name)` when somebody ticks that they are understood; `withdrawn` when another takes over."""

    acknowledged = Signal(str)
    withdrawn = Signal()

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._rig_known = False
        heading = QLabel("Cautions")
        set_kind(heading, "heading")
        self.list = self._make_list()
        self.told = Sentences(theme)
        self.name_label = QLabel("Acknowledged b&y")
        self.name = QLineEdit()
        self.name.setMaxLength(LONGEST_NAME)
        self.name.setPlaceholderText("your name")
        self.name.setAccessibleName("name of who acknowledges the cautions")
        self.name_label.setBuddy(self.name)
        self.understood = QCheckBox("&I have read and understood them")
        self.another = QPushButton("Another person")
        self.another.setToolTip("somebody else takes over and acknowledges them anew")
        set_kind(self.another, "quiet")
        self.another.setStyleSheet("padding: 0 0.4em; min-height: 1.2em;")
        head = QHBoxLayout()
        head.setSpacing(6)
        head.addWidget(heading, 1)
        head.addWidget(self.another)
        by = QHBoxLayout()
        by.setSpacing(6)
        by.addWidget(self.name_label)
        by.addWidget(self.name, 1)
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(6)
        column.addLayout(head)
        column.addWidget(self.list, 1)
        column.addWidget(self.told)
        column.addLayout(by)
        column.addWidget(self.understood)
        self.name.textChanged.connect(lambda _: self._allow())
        self.name.returnPressed.connect(self.understood.setFocus)
        self.understood.toggled.connect(self._ticked)
        self.another.clicked.connect(lambda: self.withdrawn.emit())
        self.show_state(powered=True, rig_known=False, held=None)

    def _make_list(self) -> QScrollArea:
        inner = QWidget()
        lines = QVBoxLayout(inner)
        lines.setContentsMargins(8, 6, 8, 6)
        lines.setSpacing(6)
        for number, caution in enumerate(CAUTIONS, 1):
            row = QHBoxLayout()
            row.setSpacing(6)
            count = QLabel(f"{number}")
            set_kind(count, "faint")
            words = QLabel(caution)
            words.setTextFormat(Qt.TextFormat.PlainText)
            words.setWordWrap(True)
            row.addWidget(count, 0, Qt.AlignmentFlag.AlignTop)
            row.addWidget(words, 1)
            lines.addLayout(row)
        lines.addStretch(1)
        area = QScrollArea()
        area.setObjectName("cautions")
        area.setWidgetResizable(True)
        area.setWidget(inner)
        area.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        area.setFocusPolicy(Qt.FocusPolicy.StrongFocus)  # to be scrolled by keys
        area.setAccessibleName("cautions")
        area.setAccessibleDescription(" ".join(CAUTIONS))
        area.setMinimumHeight(4 * area.fontMetrics().lineSpacing())
        return area

    def show_state(self, *, powered: bool, rig_known: bool, held: Acknowledgement | None) -> None:
        """Who has acknowledged them, or that somebody has to, or that nobody needs to."""
        self._rig_known = rig_known
        asked = powered and rig_known and held is None
        for part in (self.name_label, self.name, self.understood):
            set_shown(part, asked)
        if not rig_known:
            self.told.show_lines([(UNKNOWN, "ring", "faint")])
        elif not powered:
            self.told.show_lines([(SIMULATED, "", "faint")])
        elif held is not None:
            until = time_of_day(held.utc_s + VALID_S)
            self.told.show_lines([(f"Acknowledged by {held.name}, valid until {until}.", "disc", "good")])
        else:
            self.told.show_lines([])
        set_shown(self.told, not asked)
        set_shown(self.another, powered and rig_known and held is not None)
        self._allow()

    def _allow(self) -> None:
        named = bool(cleaned(self.name.text()))
        self.understood.setEnabled(named)
        self.understood.setToolTip("" if named else "give your name first")

    def _ticked(self, on: bool) -> None:
        if not on:
            return
        self.understood.setChecked(False)  # it is asked anew when the acknowledgement no longer holds
        self.acknowledged.emit(cleaned(self.name.text()))

    def set_theme(self, theme: Theme) -> None:
        self.told.set_theme(theme)
        edge = (
            f"#cautions {{ background: {theme.panel}; border: 1px solid {theme.rule}; border-radius: 4px; }}"
        )
        focus = f"#cautions:focus {{ border: 1px solid {theme.ink}; }}"
        self.list.setStyleSheet(edge + focus)
