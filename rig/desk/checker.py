"""Checks of what is being typed, as the window holds them: asked at any time, only the last question is answered."""

from __future__ import annotations

import json
import pickle
import sys

from PySide6.QtCore import QObject, QProcess, QTimer, Signal

from rig.desk.check_process import HEAD, READY
from rig.desk.model.checked import Checked

#: A check that nobody waits for any more is left to end for so long; starting anew takes about as long.
PATIENCE_MS = 3000
#: A check somebody waits for; a protocol of hours takes seconds, one of days a minute.
LONGEST_MS = 180_000
Texts = tuple[str, str, str, str]


class Checker(QObject):
    """`done(number, Checked)` or `failed(number, sentence)` for the last question asked, and for no other."""

    done = Signal(int, object)
    failed = Signal(int, str)

    def __init__(self, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._process: QProcess | None = None
        self._ready = False
        self._heard = bytearray()
        self._wanted: tuple[int, Texts] | None = None  # the last question, until it is answered
        self._asked: int | None = None  # what the process is at
        self._patience = QTimer(self)
        self._patience.setSingleShot(True)
        self._patience.timeout.connect(self._out_of_patience)

    @property
    def busy(self) -> bool:
        """Whether an answer is still to come."""
        return self._wanted is not None

    @property
    def pid(self) -> int:
        """Of the process, 0 while there is none."""
        return int(self._process.processId()) if self._process is not None else 0

    def ask(self, number: int, texts: Texts) -> None:
        """Check these texts; earlier questions are forgotten."""
        self._wanted = (number, texts)
        if self._process is None:
            self._start()
        elif self._asked is None:
            self._send()
        else:
            self._patience.start(PATIENCE_MS)

    def rest(self) -> None:
        """End the process; nothing more is answered until something is asked again."""
        self._wanted = None
        self._end()

    # -- the process -----------------------------------------------------------------------------------

    def _start(self) -> None:
        self._ready, self._asked = False, None
        self._heard.clear()
        process = QProcess(self)
        process.setStandardErrorFile(QProcess.nullDevice())
        process.readyReadStandardOutput.connect(self._hear)
        process.finished.connect(self._gone)
        process.errorOccurred.connect(self._broken)
        self._process = process
        process.start(sys.executable, ["-m", "rig.desk.check_process"])

    def _end(self) -> None:
        self._patience.stop()
        process, self._process = self._process, None
        self._asked, self._ready = None, False
        if process is None:
            return
        process.kill()
        process.waitForFinished(2000)
        process.deleteLater()

    def _send(self) -> None:
        if self._process is None or self._wanted is None or not self._ready:
            return
        number, texts = self._wanted
        self._asked = number
        self._process.write(json.dumps({"number": number, "texts": texts}).encode() + b"\n")
        self._patience.start(LONGEST_MS)

    def _hear(self) -> None:
        if self._process is None:
            return
        self._heard += bytes(self._process.readAllStandardOutput().data())
        while len(self._heard) >= HEAD.size:
            number, length = HEAD.unpack_from(self._heard)
            if len(self._heard) < HEAD.size + length:
                return
            data = bytes(self._heard[HEAD.size : HEAD.size + length])
            del self._heard[: HEAD.size + length]
            self._take(int(number), pickle.loads(data))

    def _take(self, number: int, answer: object) -> None:
        self._patience.stop()
        if number == READY and self._asked is None:
            self._ready = True
            self._send()
            return
        self._asked = None
        if self._wanted is None or self._wanted[0] != number:
            self._send()
            return
        self._wanted = None
        if isinstance(answer, Checked):
            self.done.emit(number, answer)
        else:
            self.failed.emit(number, str(answer))

    def _out_of_patience(self) -> None:
        """Either nobody waits for it any more, or it has taken very long."""
        late, at = self._wanted, self._asked
        self._end()
        if late is None:
            return
        if late[0] == at:
            self._give_up("The check did not come to an end in three minutes: make the protocol shorter.")
        else:
            self._start()

    def _gone(self) -> None:
        if self.sender() is not self._process:  # it was ended on purpose
            return
        self._end()
        self._give_up("The check has broken off: change something to have it made again.")

    def _broken(self, error: QProcess.ProcessError) -> None:
        if self.sender() is self._process and error is QProcess.ProcessError.FailedToStart:
            self._end()
            self._give_up("The check cannot be started: the installation is not whole.")

    def _give_up(self, sentence: str) -> None:
        if self._wanted is not None:
            number, self._wanted = self._wanted[0], None
            self.failed.emit(number, sentence)
