"""Writing a report takes seconds: a process of its own does it, which can be cancelled."""

from __future__ import annotations

import sys
from pathlib import Path

from PySide6.QtCore import QObject, QProcess, Signal


class ReportTask(QObject):
    """`done(path)` or `failed(sentence)`; nothing is emitted after `cancel`."""

    done = Signal(str)
    failed = Signal(str)

    def __init__(self, session: Path, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._out = _free(session.with_suffix(".html"))
        self._cancelled = False
        self._process = QProcess(self)
        self._process.finished.connect(self._finished)
        self._process.errorOccurred.connect(self._broken)
        words = ["-m", "rig.command", "report", str(session), "--out", str(self._out)]
        self._process.start(sys.executable, words)

    def cancel(self) -> None:
        self._cancelled = True
        self._process.kill()
        self._process.waitForFinished(2000)
        self._out.unlink(missing_ok=True)

    def _finished(self, code: int) -> None:
        if self._cancelled:
            return
        if code == 0:
            self.done.emit(str(self._out))
            return
        words = bytes(self._process.readAllStandardError().data()).decode(errors="replace").strip()
        self.failed.emit(words.split("\n")[-1] or f"the report ended with code {code}")

    def _broken(self, error: QProcess.ProcessError) -> None:
        if not self._cancelled and error is QProcess.ProcessError.FailedToStart:
            self.failed.emit("the report could not be started")


def _free(path: Path) -> Path:
    """The path, or one with a number that is not taken: no report is overwritten."""
    number, found = 2, path
    while found.exists():
        found = path.with_stem(f"{path.stem}-{number}")
        number += 1
    return found
