"""Bins folded into columns as they come, and means over each turn of the crank."""

from __future__ import annotations

import itertools

import numpy as np
from numpy.typing import NDArray

from analysis.flap import turn_times
from analysis.position import turn_means

Values = NDArray[np.float64]
Raw = NDArray[np.int32]
Ticks = NDArray[np.int64]
Marks = NDArray[np.bool_]

#: A crank slower than one turn in so long has no mean over a turn that anybody would wait for.
SLOWEST_TURN_S = 2.0


class Columns:
    """Least and greatest raw values of equal stretches of board time, the last `span_ticks` of them.

    `column_ticks` is a stretch; column n holds what came from n to n + 1 stretches on the board's clock. `add`
    takes bins in order of time: first ticks (m,), least and greatest (m, channels), and whether rows are missing
    before each.
    """

    def __init__(self, column_ticks: float, span_ticks: float) -> None:
        self.span_ticks = span_ticks
        self._column_ticks = column_ticks
        self._number = np.empty(0, np.int64)
        self._first = np.empty(0, np.int64)
        self._last = np.empty(0, np.int64)
        self.low: Raw = np.empty((0, 0), np.int32)
        self.high: Raw = np.empty((0, 0), np.int32)
        self.broken: Marks = np.empty(0, np.bool_)

    @property
    def tick(self) -> Values:
        """Middle of what each column holds, ticks, shape (n,)."""
        return np.asarray(0.5 * (self._first + self._last))

    @property
    def last_tick(self) -> int:
        """First tick of the newest bin."""
        return int(self._last[-1])

    def add(self, tick: Ticks, low: Raw, high: Raw, broken: Marks) -> None:
        """Fold bins in; the newest column stays open."""
        number = (tick // self._column_ticks).astype(np.int64)
        starts = np.flatnonzero(np.diff(number, prepend=number[0] - 1))
        ends = np.append(starts[1:], len(number)) - 1
        low, high = np.minimum.reduceat(low, starts, axis=0), np.maximum.reduceat(high, starts, axis=0)
        broken = np.maximum.reduceat(broken, starts)
        first, last, number = tick[starts], tick[ends], number[starts]
        if not len(self._number):
            self.low, self.high = low[:0], high[:0]
        elif self._number[-1] == number[0]:
            np.minimum(self.low[-1], low[0], out=low[0])
            np.maximum(self.high[-1], high[0], out=high[0])
            first[0] = self._first[-1]
            broken[0] |= self.broken[-1]
            self._keep(slice(0, len(self._number) - 1))
        self._number = np.concatenate((self._number, number))
        self._first, self._last = np.concatenate((self._first, first)), np.concatenate((self._last, last))
        self.low, self.high = np.concatenate((self.low, low)), np.concatenate((self.high, high))
        self.broken = np.concatenate((self.broken, broken))
        self._keep(slice(int(np.searchsorted(self._last, self._last[-1] - self.span_ticks)), None))

    def _keep(self, part: slice) -> None:
        self._number, self._first, self._last = self._number[part], self._first[part], self._last[part]
        self.low, self.high, self.broken = self.low[part], self.high[part], self.broken[part]


def columns_of(
    time_s: Values, low: Values, high: Values, step_s: float
) -> tuple[Values, Values, Values, NDArray[np.intp]]:
    """The same at once for values that are all there: (middle s, least, greatest, place of each first bin)."""
    if not len(time_s):
        return time_s, low, high, np.empty(0, np.intp)
    # A row that falls on a column's edge but for rounding belongs to it.
    number = np.floor(time_s / step_s + 1e-6)
    starts = np.flatnonzero(np.diff(number, prepend=number[0] - 1.0))
    ends = np.append(starts[1:], len(number)) - 1
    return (
        0.5 * (time_s[starts] + time_s[ends]),
        np.minimum.reduceat(low, starts),
        np.maximum.reduceat(high, starts),
        starts,
    )


class TurnMeans:
    """Mean of a signal over each whole turn of the crank, and the rate of each turn, as bins come in.

    `middle_s`, `mean` and `flap_hz` have one value for each turn of the last `span_s` seconds. A turn in which rows
    are missing has none, and `broken` marks the turn after it.
    """

    def __init__(self, span_s: float = np.inf) -> None:
        self._span_s = span_s
        self._time = self._value = self._crank = np.empty(0)
        self._gap = False
        self.middle_s: Values = np.empty(0)
        self.mean: Values = np.empty(0)
        self.flap_hz: Values = np.empty(0)
        self.broken: Marks = np.empty(0, np.bool_)

    def add(self, time_s: Values, value: Values, crank_rad: Values, broken: Marks) -> None:
        """Bins in order of time: s, the signal, the crank angle in rad, rows missing before it; shapes (m,)."""
        edges = [0, *np.flatnonzero(broken).tolist(), len(time_s)]
        for start, end in itertools.pairwise(edges):
            if start < len(broken) and broken[start]:
                self._time = self._value = self._crank = np.empty(0)
                self._gap = True
            if end > start:
                self._add_whole(time_s[start:end], value[start:end], crank_rad[start:end])

    def _add_whole(self, time_s: Values, value: Values, crank_rad: Values) -> None:
        time = np.concatenate((self._time, time_s))
        values, crank = np.concatenate((self._value, value)), np.concatenate((self._crank, crank_rad))
        if len(time) > 2:
            marks = turn_times(time, crank)
            if len(marks) > 1:
                middle, mean = turn_means(time, values, crank)
                broken = np.zeros(len(mean), np.bool_)
                broken[0], self._gap = self._gap, False
                self.middle_s = np.concatenate((self.middle_s, middle))
                self.mean = np.concatenate((self.mean, mean))
                self.flap_hz = np.concatenate((self.flap_hz, 1.0 / np.diff(marks)))
                self.broken = np.concatenate((self.broken, broken))
                time, values, crank = _from(marks[-1], time, values, crank)
        oldest = int(np.searchsorted(time, time[-1] - SLOWEST_TURN_S))
        if oldest:
            self._gap = True
        self._time, self._value, self._crank = time[oldest:], values[oldest:], crank[oldest:]
        old = int(np.searchsorted(self.middle_s, time[-1] - self._span_s))
        self.middle_s, self.mean = self.middle_s[old:], self.mean[old:]
        self.flap_hz, self.broken = self.flap_hz[old:], self.broken[old:]


def _from(start_s: float, *rows: Values) -> list[Values]:
    """The rows (time first) after a moment, with one at the moment itself, so that the next turn begins there."""
    time = rows[0]
    after = int(np.searchsorted(time, start_s, side="right"))
    return [np.concatenate(([np.interp(start_s, time, values)], values[after:])) for values in rows]
