"""Real time that a starved machine slips, so that a pause of this program is not taken for one of the host."""

from __future__ import annotations

from drivers.clock import Clock


class SlippingClock:
    """A clock that leaves out what the stand-in could not serve.

    A board goes on while a computer is busy; a stand-in that was not given the processor for 0.3 s cannot.
    Catching up at once would run the board's watchdog out before the heartbeats that wait in the line are
    read. So the world stands still meanwhile, and the time left out is counted. The time moves on only at `turn`: a
    pause in the middle of a turn must be known before anything is reckoned with it.
    """

    def __init__(self, clock: Clock, longest_pause_s: float = 0.05) -> None:
        self._clock = clock
        self._longest_s = longest_pause_s
        self._last_s = self._now_s = clock.now_s()
        self.slipped_s = 0.0
        self.pauses = 0

    def begin(self) -> None:
        """The serving loop begins: what came before was no pause."""
        self._last_s = self._clock.now_s()
        self._now_s = self._last_s - self.slipped_s

    def turn(self, waited_s: float) -> None:
        """Once a turn of the serving loop, which meant to wait `waited_s`."""
        now_s = self._clock.now_s()
        pause_s = now_s - self._last_s - waited_s
        if pause_s > self._longest_s:
            self.slipped_s += pause_s
            self.pauses += 1
        self._last_s = now_s
        self._now_s = now_s - self.slipped_s

    def now_s(self) -> float:
        return self._now_s

    def sleep_s(self, duration_s: float) -> None:
        self._clock.sleep_s(duration_s)
