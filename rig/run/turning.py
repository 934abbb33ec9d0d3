"""How fast the crank turns, from whole turns of its encoder; cheap enough for every frame."""

from __future__ import annotations

from collections import deque

#: Longest history looked back over: below one turn in this time the rate is told from what there is.
LONGEST_S = 1.0
#: A count is garbled when it lies this many times as far off as its successor, and by this part of a turn.
FAR, PART = 3, 0.25


class TurnCounter:
    """Flap rate from encoder counts at the ends of frames.

    A rate over less than a turn would show the ripple of the crank within its turn. A count is believed when
    its successor agrees, one frame later, so that a single garbled one neither trips a limit nor looks like a
    crank at rest; an encoder that has slipped for good is believed.
    """

    def __init__(self, counts_per_turn: float, tick_hz: int) -> None:
        if counts_per_turn <= 0.0:
            raise ValueError("a crank encoder needs counts per turn")
        self._counts = counts_per_turn
        self._tick_hz = tick_hz
        self._history: deque[tuple[int, int]] = deque()
        self._waiting: tuple[int, int] | None = None
        self.flap_hz = 0.0

    def add(self, tick: int, count: int) -> float:
        """Take the count at a tick; the flap rate in Hz, without sign."""
        waiting = self._waiting
        if waiting is not None:
            if tick <= waiting[0]:
                return self.flap_hz
            if not self._garbled(waiting[1], count):
                self._believe(*waiting)
        self._waiting = (tick, count)
        return self.flap_hz

    def _garbled(self, count: int, successor: int) -> bool:
        if not self._history:
            return False
        last = self._history[-1][1]
        return abs(count - last) > FAR * abs(successor - last) + PART * self._counts

    def _believe(self, tick: int, count: int) -> None:
        history = self._history
        history.append((tick, count))
        longest = LONGEST_S * self._tick_hz
        while len(history) > 2 and tick - history[1][0] >= longest:
            history.popleft()
        before_tick, before_count = history[0]
        for one_tick, one_count in reversed(history):
            if abs(count - one_count) >= self._counts:
                before_tick, before_count = one_tick, one_count
                break
        if tick > before_tick:
            turned = abs(count - before_count) / self._counts
            self.flap_hz = turned * self._tick_hz / (tick - before_tick)
