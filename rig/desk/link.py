"""The bench process as the window holds it: messages into the model, keys out, signs of life from the window's loop."""

from __future__ import annotations

from PySide6.QtCore import QObject, QTimer, Signal

from rig.bench.client import BenchClient
from rig.bench.job import Job
from rig.desk.model.run_model import Changed, RunModel

#: How often the pipe is looked at. The sign of life comes from here too: if the window hangs, the bench ramps down.
LOOK_MS = 20
LIFE_EVERY = 5


class BenchLink(QObject):
    """One run. `changed(set)` after every look that brought something; `ended()` when the bench process is gone."""

    changed = Signal(object)
    ended = Signal()

    def __init__(self, job: Job, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self.job = job
        self.model = RunModel()
        self._looks = 0
        self._over = False
        self._client = BenchClient(job)
        self._timer = QTimer(self)
        self._timer.setInterval(LOOK_MS)
        self._timer.timeout.connect(self._look)
        self._timer.start()
        self.model.start()

    @property
    def pid(self) -> int:
        return self._client.pid

    @property
    def over(self) -> bool:
        """Whether the bench process has ended."""
        return self._over

    def send(self, kind: str, reason: str = "", tap: int | None = None) -> None:
        """An input of the operator; see `rig.run.inputs`."""
        self._client.input(kind, reason, tap)

    def halt(self) -> None:
        self.send("halt")

    def _look(self) -> None:
        self._looks += 1
        if self._looks % LIFE_EVERY == 0:
            self._client.here()
        gone = self._client.ended
        changed: Changed = set()
        for line in self._client.messages():
            changed |= self.model.take(line)
        if gone and not self._over:
            self._over = True
            self._timer.stop()
            if self.model.exit_code is None:
                words = (
                    "the bench process has died; the board cuts the drive by itself when the heartbeat stops"
                )
                changed |= self.model.take(
                    {"failed": {"exit_code": 4, "reason": f"{words}. {self._rescue()}"}}
                )
        if changed:
            self.changed.emit(changed)
        if self._over:
            self._client.close(5.0)
            self.ended.emit()

    def _rescue(self) -> str:
        """What is to be done with the rows of a run that broke off."""
        if self.job.journal.exists():
            return f"Its rows are in {self.job.journal}: 'haltere recover' makes a session of them"
        return "No rows were written"

    def close(self) -> None:
        """Let go: the end of the pipe halts a run that is still on; the bench process seals it by itself."""
        self._timer.stop()
        if not self._over:
            self._over = True
            self._client.release()
