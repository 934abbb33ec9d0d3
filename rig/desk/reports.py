"""The report of the session just run: written by a task that can be cancelled, then opened."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from PySide6.QtCore import QObject, QUrl
from PySide6.QtGui import QDesktopServices

from rig.desk.report_task import ReportTask
from rig.desk.widgets.outcome_bar import OutcomeBar


class Reports(QObject):
    """Answers the report button; `session` gives the path of the session at hand, "" if there is none."""

    def __init__(self, bar: OutcomeBar, session: Callable[[], str]) -> None:
        super().__init__(bar)
        self._bar = bar
        self._session = session
        self.task: ReportTask | None = None
        bar.report.connect(self.open)
        bar.cancel_report.connect(self.give_up)

    def open(self) -> None:
        """Write the report and open it."""
        path = self._session()
        if self.task is not None or not path:
            return
        self.task = ReportTask(Path(path), self)
        self.task.done.connect(self._done)
        self.task.failed.connect(lambda words: self._over(f"No report: {words}"))
        self._bar.set_busy("Working the session out again and writing the report …")

    def give_up(self) -> None:
        """The operator does not want it any more."""
        self.cancel()
        self._over("The report was cancelled; the session is untouched.")

    def cancel(self) -> None:
        """End the task, if there is one, without a word."""
        if self.task is not None:
            self.task.cancel()
            self.task = None

    def _done(self, path: str) -> None:
        self._over(f"The report is {path}")
        QDesktopServices.openUrl(QUrl.fromLocalFile(path))

    def _over(self, words: str) -> None:
        self.task = None
        self._bar.set_busy("")
        self._bar.say(words)
