"""The page of a run or a replay, with what is shown at its foot."""

from __future__ import annotations

from PySide6.QtWidgets import QVBoxLayout, QWidget

from rig.desk.theme import Theme
from rig.desk.widgets.outcome_bar import OutcomeBar
from rig.desk.widgets.replay_bar import ReplayBar
from rig.desk.widgets.run_page import RunPage


class BenchPage(QWidget):
    """Run page, outcome, controls of a replay."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.run = RunPage(theme)
        self.outcome = OutcomeBar(theme)
        self.replay_bar = ReplayBar(theme)
        self.replay_bar.setVisible(False)
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(0)
        column.addWidget(self.run, 1)
        column.addWidget(self.outcome)
        column.addWidget(self.replay_bar)

    def set_theme(self, theme: Theme) -> None:
        for part in (self.run, self.outcome, self.replay_bar):
            part.set_theme(theme)
