"""The bench process as its clients hold it: start it, hear it, speak to it, never wait for it."""

from __future__ import annotations

import subprocess
import sys
import threading
from contextlib import suppress
from typing import Any

from rig.bench.job import Job
from rig.bench.lines import LineReader, LineWriter

#: Well below the silence after which the bench ramps down.
SIGN_OF_LIFE_S = 0.2


class BenchClient:
    """One bench process with one run. Use it in a `with`: leaving it closes the pipe, which halts the bench.

    Call `here` at least every `SIGN_OF_LIFE_S` from the loop that the operator depends on: a client that can
    no longer be operated must not keep a motor on.
    """

    def __init__(self, job: Job) -> None:
        # In a session of its own: Ctrl-C is for the client, which asks the bench to halt.
        self.process = subprocess.Popen(
            [sys.executable, "-m", "rig.bench"],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            start_new_session=True,
        )
        assert self.process.stdin is not None and self.process.stdout is not None
        self._reader = LineReader(self.process.stdout.fileno())
        self._writer = LineWriter(self.process.stdin.fileno())
        self._writer.send({"job": job.to_json()})

    @property
    def pid(self) -> int:
        return self.process.pid

    @property
    def ended(self) -> bool:
        """Whether the bench process has closed its pipe, by ending or dying, and all it told was taken."""
        return self._reader.ended

    def here(self) -> None:
        """A sign of life."""
        self._writer.send({"here": 1}, droppable=True)

    def input(self, kind: str, reason: str = "", tap: int | None = None) -> None:
        """Halt, acknowledge and so on: see `rig.run.inputs`."""
        named = {} if tap is None else {"tap": tap}
        self._writer.send({"input": kind, "reason": reason, **named})

    def messages(self) -> list[dict[str, Any]]:
        """What has come."""
        return self._reader.take()

    def wait(self, timeout_s: float) -> dict[str, Any] | None:
        """The next message, or None."""
        return self._reader.wait(timeout_s)

    def release(self) -> None:
        """Close the pipe and wait for nothing: the bench process halts, seals and ends by itself."""
        self._writer.close(0.2)
        if self.process.stdin is not None:
            with suppress(OSError):
                self.process.stdin.close()
        threading.Thread(target=self._reap, name="end of a bench process", daemon=True).start()

    def _reap(self) -> None:
        self.process.wait()
        if self.process.stdout is not None:
            self._reader.join()
            self.process.stdout.close()

    def close(self, patience_s: float = 200.0) -> int:
        """Close the pipe and wait for the end: a run still on is halted, brought to standstill and sealed."""
        self._writer.close(1.0)
        if self.process.stdin is not None:
            with suppress(OSError):
                self.process.stdin.close()
        try:
            code = self.process.wait(patience_s)
        except subprocess.TimeoutExpired:
            self.process.kill()  # the board's watchdog takes the drive away
            code = self.process.wait()
        if self.process.stdout is not None:
            self._reader.join()
            self.process.stdout.close()
        return code

    def __enter__(self) -> BenchClient:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()
