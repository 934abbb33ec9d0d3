"""What a check has come to: the mistakes if there are any, else the dry run."""

from __future__ import annotations

from PySide6.QtCore import Signal
from PySide6.QtWidgets import QLabel, QStackedWidget, QVBoxLayout, QWidget

from rig.desk.model.checked import Checked
from rig.desk.theme import Theme
from rig.desk.widgets.forecast_view import ForecastView
from rig.desk.widgets.problem_list import ProblemList
from rig.desk.widgets.style import set_kind

DRY_RUN, MISTAKES = "Dry run", "Mistakes"


class CheckResults(QWidget):
    """`chosen(which, line)` when a mistake is to be gone to."""

    chosen = Signal(str, int)

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.problems = ProblemList(theme)
        self.forecast = ForecastView(theme)
        self.title = QLabel(DRY_RUN)
        set_kind(self.title, "heading")
        self.stack = QStackedWidget()
        self.stack.addWidget(self.forecast)
        self.stack.addWidget(self.problems)
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 4, 0, 0)
        column.setSpacing(4)
        column.addWidget(self.title)
        column.addWidget(self.stack, 1)
        self.problems.chosen.connect(self.chosen)
        self.forecast.show_forecast(None)

    def show_checked(self, checked: Checked, rig_name: str, protocol_name: str) -> None:
        if checked.problem_count:
            self.problems.show_checked(checked, rig_name, protocol_name)
            self._show(self.problems, MISTAKES)
        else:
            self.forecast.show_forecast(checked.forecast)
            self._show(self.forecast, DRY_RUN)

    def show_sentence(self, sentence: str) -> None:
        """The check has not come to an end."""
        self.problems.show_sentence(sentence)
        self._show(self.problems, MISTAKES)

    def _show(self, part: QWidget, title: str) -> None:
        self.stack.setCurrentWidget(part)
        self.title.setText(title)

    def set_theme(self, theme: Theme) -> None:
        self.problems.set_theme(theme)
        self.forecast.set_theme(theme)
