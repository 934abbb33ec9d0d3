"""The rows of one stream as arrays that grow while a run goes on."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from drivers.channels import ChannelTable
from drivers.rows import RowBlock

Values = NDArray[np.float64]


class RowStore:
    """Rows in order of arrival, looked up by board tick.

    Times are seconds of board time since the first row. Only raw integers are kept; scaling happens on
    the slice that is asked for.
    """

    def __init__(self, channels: ChannelTable, tick_hz: int) -> None:
        self.channels = channels
        self.tick_hz = tick_hz
        self.lost_rows = 0
        self.lost_frames = 0
        self._tick = np.empty(1 << 14, dtype=np.uint64)
        self._raw = np.empty((1 << 14, len(channels)), dtype=np.int32)
        self._n = 0

    def __len__(self) -> int:
        return self._n

    @property
    def last_tick(self) -> int:
        """Tick of the newest row; -1 while there is none."""
        return int(self._tick[self._n - 1]) if self._n else -1

    @property
    def first_tick(self) -> int:
        return int(self._tick[0]) if self._n else 0

    def append(self, block: RowBlock) -> None:
        n = len(block)
        while self._n + n > len(self._tick):
            self._tick = np.concatenate([self._tick, np.empty_like(self._tick)])
            self._raw = np.concatenate([self._raw, np.empty_like(self._raw)])
        self._tick[self._n : self._n + n] = block.tick
        self._raw[self._n : self._n + n] = block.raw
        self._n += n
        self.lost_rows += block.lost_rows
        self.lost_frames += block.lost_frames

    def time_of(self, tick: int) -> float:
        """Board time of a tick, s since the first row."""
        return (tick - self.first_tick) / self.tick_hz

    def rows(self, start_tick: int, end_tick: int) -> slice:
        """Rows with start_tick <= tick < end_tick."""
        ticks = self._tick[: self._n]
        start, end = np.searchsorted(ticks, np.array([max(start_tick, 0), max(end_tick, 0)], dtype=np.uint64))
        return slice(int(start), int(end))

    def time_s(self, rows: slice) -> Values:
        """Board time of each row, s since the first row."""
        return (self._tick[rows] - self._tick[0]).astype(np.float64) / self.tick_hz

    def gap_in(self, rows: slice) -> bool:
        """Whether rows are missing inside a slice (a step of more than 1.5 row periods)."""
        steps = np.diff(self._tick[rows].astype(np.int64))
        return bool(len(steps) and steps.max() > 1.5 * steps.min())

    def raw(self, measures: str, rows: slice) -> NDArray[np.int32] | None:
        column = self.channels.measuring(measures)
        return None if column is None else self._raw[rows, column]

    def clipped(self, measures: str, rows: slice) -> bool:
        """Whether any value of the slice is at the end of the channel's range."""
        column = self.channels.measuring(measures)
        if column is None:
            return False
        channel = self.channels[column]
        raw = self._raw[rows, column]
        return bool(np.any((raw <= channel.low_raw) | (raw >= channel.high_raw)))

    def values(self, measures: str, rows: slice) -> Values | None:
        """A channel in SI units, at the time of the body angle's samples.

        Channels differ in delay (converter, skew within the row): at 43 Hz, 100 us are 1.5 deg of crank
        phase, so every channel is brought to the sampling time of the body angle by interpolation.
        """
        column = self.channels.measuring(measures)
        if column is None:
            return None
        channel = self.channels[column]
        values = channel.values(self._raw[rows, column])
        body = self.channels.measuring("body angle")
        shift_s = 0.0 if body is None else channel.delay_s - self.channels[body].delay_s
        if abs(shift_s) < 1e-9 or len(values) < 2:
            return values
        time_s = self.time_s(rows)
        # A value of age `delay` at tick t was true at t - delay; the body sample at t - body delay.
        step = np.gradient(values, time_s)
        return values + step * shift_s
