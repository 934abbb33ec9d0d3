"""Ranges of axes that do not jitter, and round numbers along them."""

from __future__ import annotations

import math
from collections.abc import Sequence

#: A range that is looked at is left with so much room at both ends, as a share of what is in it.
ROOM = 0.08
#: It shrinks once what is in it has needed less than this share of it for so long.
NARROW, PATIENCE_S = 0.5, 3.0


class CalmRange:
    """A range that widens at once, to round numbers, and narrows only after a while.

    `least` is the narrowest range, so that noise is not blown up to fill a plot. Times are those of the data, s.
    """

    def __init__(self, least: float) -> None:
        self._least = least
        self._narrow_since: float | None = None
        self._needed: tuple[float, float] | None = None  # since then
        self.low, self.high = 0.0, least

    def take(self, low: float, high: float, at_s: float) -> bool:
        """What is to be seen at a time; whether the range has changed."""
        if not (math.isfinite(low) and math.isfinite(high)):
            return False
        before = self.low, self.high
        if self._needed is None:
            self.low, self.high = self._around(low, high)
            self._needed = low, high
            return True
        if low < self.low or high > self.high:
            self.low, self.high = self._around(min(low, self._needed[0]), max(high, self._needed[1]))
            self._needed, self._narrow_since = (low, high), None
            return (self.low, self.high) != before
        if self._narrow_since is None or at_s < self._narrow_since:
            self._narrow_since, self._needed = at_s, (low, high)
        self._needed = min(low, self._needed[0]), max(high, self._needed[1])
        if at_s - self._narrow_since < PATIENCE_S:
            return False
        wanted = self._around(*self._needed)
        self._narrow_since = None
        if wanted[1] - wanted[0] > NARROW * (self.high - self.low):
            return False
        self.low, self.high = wanted
        return self.low != before[0] or self.high != before[1]

    def forget(self) -> None:
        """The next values decide alone."""
        self._needed = self._narrow_since = None

    def _around(self, low: float, high: float) -> tuple[float, float]:
        width = max(high - low, 0.0)
        low, high = low - ROOM * width, high + ROOM * width
        if high - low < self._least:
            middle = 0.5 * (low + high)
            low, high = middle - 0.5 * self._least, middle + 0.5 * self._least
        step = 0.25 * nice_step(high - low, 4)
        return math.floor(low / step) * step, math.ceil(high / step) * step


class WideningRange:
    """A range that only ever widens, until it is told to forget; `room` is left at both ends as a share of it."""

    def __init__(self, room: float = ROOM) -> None:
        self._room = room
        self._held: tuple[float, float] | None = None

    def take(self, values: Sequence[float], otherwise: tuple[float, float]) -> tuple[float, float]:
        """The range that holds the values and all before them; `otherwise` where there has been none."""
        finite = [value for value in values if math.isfinite(value)]
        if finite:
            low, high = min(finite), max(finite)
            if self._held is not None:
                low, high = min(low, self._held[0]), max(high, self._held[1])
            self._held = low, high
        if self._held is None or self._held[0] == self._held[1]:
            middle = 0.0 if self._held is None else self._held[0] - 0.5 * sum(otherwise)
            return otherwise[0] + middle, otherwise[1] + middle
        room = self._room * (self._held[1] - self._held[0])
        return self._held[0] - room, self._held[1] + room

    def forget(self) -> None:
        self._held = None


def nice_step(width: float, most: int) -> float:
    """The smallest of 1, 2, 5 x 10^n that cuts a width into no more than `most` parts."""
    if not (math.isfinite(width) and width > 0.0):
        return 1.0
    raw = width / max(most, 1)
    power = 10.0 ** math.floor(math.log10(raw))
    for factor in (1.0, 2.0, 5.0):
        if factor * power >= raw * (1.0 - 1e-9):
            return factor * power
    return 10.0 * power


def ticks(low: float, high: float, most: int) -> list[tuple[float, str]]:
    """Round numbers from low to high, at most `most` + 1 but two at least, with their texts."""
    half = 0.5 * (high - low)
    if not (math.isfinite(half) and half > 0.0):
        return []
    step = nice_step(high - low, most)
    if math.floor(high / step + 1e-9) - math.ceil(low / step - 1e-9) < 1:
        # Two multiples of whatever is no longer than half of the width lie within it.
        power = 10.0 ** math.floor(math.log10(half))
        step = power * max(factor for factor in (1.0, 2.0, 5.0) if factor * power <= half * (1.0 + 1e-9))
    places = max(0, -math.floor(math.log10(step) + 1e-9))
    found = []
    for count in range(math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9) + 1):
        text = f"{count * step:.{places}f}".replace("-", "−")
        found.append((count * step, text.removeprefix("−") if count == 0 else text))
    return found
