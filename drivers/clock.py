"""The one clock of a run, injected everywhere a time is needed.

Nothing else in Haltere asks the operating system for the time while a run is on: logic works on
board ticks, and waiting is done through a clock, so that a simulated bench can run as fast as it
computes and a test can decide what time it is.
"""

from __future__ import annotations

import time
from typing import Protocol


class Clock(Protocol):
    """Monotonic host time in seconds, and a way to wait."""

    def now_s(self) -> float: ...

    def sleep_s(self, duration_s: float) -> None: ...


class HostClock:
    """The machine's monotonic clock; never the wall clock, which can be set back during a run."""

    def now_s(self) -> float:
        return time.monotonic()

    def sleep_s(self, duration_s: float) -> None:
        if duration_s > 0:
            time.sleep(duration_s)


class VirtualClock:
    """Time that moves only when told: sleeping advances it at once."""

    def __init__(self, start_s: float = 0.0) -> None:
        self._now_s = start_s

    def now_s(self) -> float:
        return self._now_s

    def sleep_s(self, duration_s: float) -> None:
        if duration_s > 0:
            self._now_s += duration_s
