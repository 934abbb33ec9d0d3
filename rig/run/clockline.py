"""Board clock against host clock: a robust line through arrivals, its slope the drift in ppm.

A frame arrives after it was filled, by a delay that is never negative and now and then long. So of every
second only the promptest arrival counts, and the slope between seconds is the median of all pairs (Theil 1950,
Sen 1968): it stays right while up to 29 % of the points are late.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

#: Fewer seconds than this say nothing about ppm.
FEWEST_POINTS = 10
#: Beyond that every second one is left out, so that a day of running stays a small sum.
MOST_POINTS = 600


@dataclass(frozen=True)
class ClockLine:
    """`drift_ppm` positive: the board counts more ticks than the host has time for. Its standard
    uncertainty, the span it rests on, and the longest delay of an arrival behind the promptest line."""

    drift_ppm: float
    drift_std_ppm: float
    span_s: float
    longest_delay_s: float


class ClockPairs:
    """Collects (host time, board tick) pairs, one add per frame."""

    def __init__(self, tick_hz: int) -> None:
        self._tick_hz = tick_hz
        self._origin: tuple[float, int] | None = None
        self._points: list[tuple[float, float]] = []  # board time s, delay s of the promptest arrival
        self._second = 0
        self._best: tuple[float, float] | None = None
        self._every = 1
        self._longest_s = -math.inf

    def add(self, host_s: float, tick: int) -> None:
        if self._origin is None:
            self._origin = host_s, tick
        board_s = (tick - self._origin[1]) / self._tick_hz
        delay_s = host_s - self._origin[0] - board_s
        self._longest_s = max(self._longest_s, delay_s)
        second = int(board_s) // self._every
        if second != self._second:
            self._keep()
            self._second = second
        if self._best is None or delay_s < self._best[1]:
            self._best = board_s, delay_s

    def _keep(self) -> None:
        if self._best is not None:
            self._points.append(self._best)
        self._best = None
        if len(self._points) > MOST_POINTS:
            pairs = zip(self._points[::2], self._points[1::2], strict=False)
            self._points = [min(pair, key=lambda point: point[1]) for pair in pairs]
            self._every *= 2

    def line(self) -> ClockLine | None:
        """The line so far; None while there are too few seconds."""
        points = self._points + ([self._best] if self._best is not None else [])
        if len(points) < FEWEST_POINTS:
            return None
        board_s, delay_s = np.array(points).T
        first, second = np.triu_indices(len(points), 1)
        slopes = (delay_s[second] - delay_s[first]) / (board_s[second] - board_s[first])
        slope = float(np.median(slopes))
        rest = delay_s - slope * board_s
        spread = 1.4826 * float(np.median(np.abs(rest - np.median(rest))))
        std = spread / math.sqrt(float(np.sum((board_s - board_s.mean()) ** 2)))
        # Of two clocks that ran equally long the fast one counts more: delay then falls.
        return ClockLine(
            -1e6 * slope, 1e6 * std, float(board_s[-1] - board_s[0]), self._longest_s - float(rest.min())
        )
