"""Fits of taps in replay, as the window holds them: one at a time, and of those that wait only the last is kept."""

from __future__ import annotations

import json
import sys
from pathlib import Path

from PySide6.QtCore import QObject, QProcess, Signal


class TapFitter(QObject):
    """`made(number, picture)` for a tap that was asked for, None where no picture can be made of it."""

    made = Signal(int, object)

    def __init__(self, path: Path, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._path = path
        self._process: QProcess | None = None
        self._wanted: int | None = None
        self._asked: int | None = None  # what the process is at

    @property
    def busy(self) -> bool:
        """Whether a picture is being made."""
        return self._asked is not None

    def start(self) -> None:
        """Have the process there before it is needed: it takes a second to load."""
        if self._process is not None:
            return
        process = QProcess(self)
        process.setStandardErrorFile(QProcess.nullDevice())
        process.readyReadStandardOutput.connect(self._hear)
        process.finished.connect(self._gone)
        process.errorOccurred.connect(self._broken)
        self._process = process
        process.start(sys.executable, ["-m", "rig.desk.tap_process", str(self._path)])

    def ask(self, number: int) -> None:
        """A tap is looked at; one asked for before that waits still is forgotten."""
        self._wanted = number
        self.start()
        self._send()

    def close(self) -> None:
        """End the process; safe to repeat."""
        process, self._process = self._process, None
        self._wanted = self._asked = None
        if process is not None:
            process.kill()
            process.waitForFinished(2000)
            process.deleteLater()

    def _send(self) -> None:
        if self._process is not None and self._asked is None and self._wanted is not None:
            self._asked, self._wanted = self._wanted, None
            self._process.write(f"{self._asked}\n".encode())

    def _hear(self) -> None:
        while self._process is not None and self._process.canReadLine():
            told = json.loads(bytes(self._process.readLine().data()))
            self._take(told["picture"])

    def _take(self, picture: object) -> None:
        number, self._asked = self._asked, None
        if self._wanted == number:
            self._wanted = None
        if number is not None:
            self.made.emit(number, picture)
        self._send()

    def _gone(self) -> None:
        if self.sender() is self._process:  # else it was ended on purpose
            asked, wanted = self._asked, self._wanted
            self.close()
            self._asked = asked
            self._take(None)
            if wanted is not None and wanted != asked:
                self.ask(wanted)

    def _broken(self, error: QProcess.ProcessError) -> None:
        if error is QProcess.ProcessError.FailedToStart:
            self._gone()
