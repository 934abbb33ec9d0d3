"""How fast the crank turns, from whole turns of its encoder; cheap enough for every frame."""

from __future__ import annotations

from collections import deque

#: Longest history looked back over: below one turn in this time the rate is told from what there is.
LONGEST_S = 1.0


class TurnCounter:
    """Flap rate from encoder counts at the ends of frames.

    A rate over less than a turn would show the ripple of the crank within its turn. The median of the last
    three is told, so that one garbled count neither trips a limit nor looks like a crank at rest.
    """

    def __init__(self, counts_per_turn: float, tick_hz: int) -> None:
        if counts_per_turn <= 0.0:
            raise ValueError("a crank encoder needs counts per turn")
        self._counts = counts_per_turn
        self._tick_hz = tick_hz
        self._history: deque[tuple[int, int]] = deque()
        self._last: deque[float] = deque(maxlen=3)
        self.flap_hz = 0.0

    def add(self, tick: int, count: int) -> float:
        """Take the count at a tick; the flap rate in Hz, without sign."""
        history = self._history
        if history and tick <= history[-1][0]:
            return self.flap_hz
        history.append((tick, count))
        longest = LONGEST_S * self._tick_hz
        while len(history) > 2 and tick - history[1][0] >= longest:
            history.popleft()
        for before_tick, before_count in reversed(history):
            turned = abs(count - before_count)
            if turned >= self._counts:
                return self._tell(turned, tick - before_tick)
        first_tick, first_count = history[0]
        return self._tell(abs(count - first_count), tick - first_tick) if tick > first_tick else self.flap_hz

    def _tell(self, turned: int, ticks: int) -> float:
        self._last.append(turned / self._counts * self._tick_hz / ticks)
        self.flap_hz = sorted(self._last)[len(self._last) // 2]
        return self.flap_hz

    @property
    def history_s(self) -> float:
        """How far back the present history reaches."""
        return (self._history[-1][0] - self._history[0][0]) / self._tick_hz if self._history else 0.0
