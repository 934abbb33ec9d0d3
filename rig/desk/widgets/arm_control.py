"""The arm button, and in words what is missing before it can be pressed."""

from __future__ import annotations

from collections.abc import Sequence

from PySide6.QtCore import QEvent, Signal
from PySide6.QtWidgets import QCheckBox, QPushButton, QSizePolicy, QVBoxLayout, QWidget

from rig.desk.theme import Theme
from rig.desk.widgets.sentences import Sentences
from rig.desk.widgets.shapes import sized
from rig.desk.widgets.style import set_kind, set_shown

POWERED = "Arming switches the drive on. Everybody clear of the rig?"
SIMULATED = "Nothing is powered: the run is simulated."


class ArmControl(QWidget):
    """`pressed` when the run is to begin; `although_changed` when running over a limit is wanted or not."""

    pressed = Signal()
    although_changed = Signal()

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._missing: list[str] = []
        self.told = Sentences(theme)
        self.although = QCheckBox("R&un although a limit would be crossed")
        self.although.setToolTip("every limit stays on: the run is halted when one is crossed")
        self.although.setAccessibleDescription(self.although.toolTip())
        self.although.toggled.connect(lambda _: self.although_changed.emit())
        self.button = QPushButton("&Arm and run")
        self.button.setAccessibleName("Arm and run")
        self.button.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Fixed)
        self.button.setAutoDefault(False)
        self.button.clicked.connect(lambda: self.pressed.emit())
        set_kind(self.button, "arm")
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(8)
        column.addWidget(self.although)
        column.addWidget(self.told)
        column.addWidget(self.button)
        self._fit()
        self.show_state([], crossings=False, powered=True)

    def show_state(self, missing: Sequence[str], *, crossings: bool, powered: bool) -> None:
        """What is missing, or what arming does."""
        self._missing = list(missing)
        set_shown(self.although, crossings)
        if not crossings and self.although.isChecked():
            self.although.setChecked(False)
        ready = POWERED if powered else SIMULATED
        if missing:
            self.told.show_lines([(sentence, "ring", "") for sentence in missing])
        else:
            self.told.show_lines([(ready, "right" if powered else "right_hollow", "")])
        words = " ".join(missing)
        self.button.setEnabled(not missing)
        self.button.setAccessibleDescription(f"Missing: {words}" if missing else ready)
        self.button.setToolTip(words or ready)

    def missing(self) -> list[str]:
        """The sentences that keep the button from being pressed."""
        return list(self._missing)

    def set_theme(self, theme: Theme) -> None:
        self.told.set_theme(theme)
        self._fit()

    def _fit(self) -> None:
        font = sized(self.font(), 1.35, bold=True)
        if font != self.button.font():
            self.button.setFont(font)
        self.button.setMinimumHeight(round(3.0 * self.fontMetrics().lineSpacing()))

    def changeEvent(self, event: QEvent) -> None:
        super().changeEvent(event)
        if event.type() == QEvent.Type.FontChange and hasattr(self, "button"):
            self._fit()
