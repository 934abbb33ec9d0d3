"""What a run came to, and what can be done next: report, replay, another run."""

from __future__ import annotations

from PySide6.QtCore import Signal
from PySide6.QtWidgets import QHBoxLayout, QLabel, QPushButton, QSizePolicy, QWidget

from rig.desk.model.run_model import RunModel
from rig.desk.theme import Theme


class OutcomeBar(QWidget):
    """Shown once a run has ended; `busy` turns the report button into one that cancels it."""

    report = Signal()
    cancel_report = Signal()
    replay = Signal()
    again = Signal()

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._busy = False
        self.text = QLabel()
        self.text.setWordWrap(True)
        self.text.setAccessibleName("Outcome of the run")
        self.text.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)
        self.report_button = self._button("Open the &report", "Write the report of this session and open it")
        self.report_button.clicked.connect(lambda: (self.cancel_report if self._busy else self.report).emit())
        self.replay_button = self._button("Re&play it", "Look at this session again")
        self.replay_button.clicked.connect(self.replay)
        self.again_button = self._button("Prepare the &next run", "Back to rig and protocol")
        self.again_button.clicked.connect(self.again)
        row = QHBoxLayout(self)
        row.setContentsMargins(10, 6, 10, 6)
        row.addWidget(self.text, 1)
        for button in (self.report_button, self.replay_button, self.again_button):
            row.addWidget(button)
        self.setVisible(False)

    def set_theme(self, theme: Theme) -> None:
        """Nothing of its own is coloured."""

    def refresh(self, model: RunModel) -> None:
        over = model.phase in ("finished", "failed")
        self.setVisible(over)
        if not over:
            return
        kept = bool(model.session)
        if model.phase == "failed":
            words = f"Not started: {model.reason}."
        elif model.closed and not kept:
            words = f"Ended early: {model.reason}."
        elif not kept and model.exit_code == 0:
            words = "Finished. The session is being worked out and sealed …"
        else:
            how = "Finished" if model.exit_code == 0 else "Ended early"
            why = "" if model.exit_code == 0 else f": {model.reason}"
            words = f"{how}{why}. " + (
                f"Everything is in {model.session}" if kept else "Sealing the session …"
            )
        self.text.setText(words)
        self.report_button.setEnabled(kept)
        self.replay_button.setEnabled(kept)
        self.again_button.setEnabled(model.closed)

    def set_busy(self, words: str) -> None:
        """A report is being written ("": no more)."""
        self._busy = bool(words)
        self.report_button.setText("&Cancel the report" if self._busy else "Open the &report")
        if words:
            self.text.setText(words)

    def say(self, words: str) -> None:
        self.text.setText(words)
        self.setVisible(True)

    def _button(self, text: str, tip: str) -> QPushButton:
        button = QPushButton(text)
        button.setToolTip(tip)
        button.setAccessibleName(text.replace("&", ""))
        button.setAccessibleDescription(tip)
        return button
