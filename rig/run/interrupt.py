"""Ctrl-C and a request to terminate, taken as the operator's halt: the run then ends at standstill."""

from __future__ import annotations

import signal
import threading
from types import FrameType, TracebackType
from typing import Any


class HaltSignals:
    """While entered, the first signal sets `asked`; the second one raises KeyboardInterrupt.

    Raising at once could tear a frame apart between journal and runner. Outside the main thread, where Python
    lets nobody handle signals, it does nothing.
    """

    def __init__(self) -> None:
        self.asked = False
        self._before: dict[signal.Signals, Any] = {}

    def __enter__(self) -> HaltSignals:
        if threading.current_thread() is threading.main_thread():
            for number in (signal.SIGINT, signal.SIGTERM):
                self._before[number] = signal.signal(number, self._take)
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        for number, handler in self._before.items():
            signal.signal(number, handler)

    def _take(self, number: int, frame: FrameType | None) -> None:
        if self.asked:
            raise KeyboardInterrupt
        self.asked = True
