"""A board at the end of a wire in one process: the real driver, the real bytes, a virtual clock."""

from __future__ import annotations

from collections.abc import Callable

from drivers.board import BoardBench
from drivers.clock import VirtualClock
from drivers.errors import LinkError
from drivers.standin.board_end import BoardEnd

STEP_S = 0.001


class Cable:
    """Carries bytes to a `BoardEnd` and back; time passes while it is read. `block` bytes come at a time."""

    def __init__(self, end: BoardEnd, clock: VirtualClock, block: int = 1 << 16) -> None:
        self.end = end
        self.clock = clock
        self.block = block
        self.plugged = True
        self.meddle: Callable[[bytes], bytes] = lambda data: data  # what the line does to the board's bytes
        self.meddle_out: Callable[[bytes], bytes] = lambda data: data
        self.closed = 0

    def read(self, max_wait_s: float) -> bytes:
        waited_s = 0.0
        while True:
            self._check()
            self.end.turn()
            data = self.end.outgoing()[: self.block]
            if data:
                self.end.sent(len(data))
                data = self.meddle(data)
                if data:
                    return data
            elif waited_s >= max_wait_s:
                return b""
            self.clock.sleep_s(STEP_S)
            waited_s += STEP_S

    def write(self, data: bytes) -> None:
        self._check()
        self.end.turn()
        self.end.take(self.meddle_out(data))

    def close(self) -> None:
        self.closed += 1

    def _check(self) -> None:
        if not self.plugged:
            raise LinkError("the line to the bench is down")


def wired(make: Callable[..., object], **changes: object) -> tuple[BoardBench, Cable]:
    """A board bench on a cable to the simulated bench `make(clock=...)` builds."""
    clock = VirtualClock()
    cable = Cable(BoardEnd(make(clock=clock, **changes), clock), clock)  # type: ignore[arg-type]
    return BoardBench(lambda: cable, clock), cable
