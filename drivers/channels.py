"""The channel table: what each column of raw integers means, in SI units.

A bench tells its channel table when it is opened, so the host needs no second description of it.
Value in SI units = raw * scale + offset.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

#: Quantities a channel may measure, with the SI unit its scaled values have.
MEASURED_UNITS = {
    "body angle": "rad",
    "crank angle": "rad",
    "vertical load": "N",
    "motor current": "A",
    "motor voltage": "V",
    "carriage height": "m",
    "tap force": "N",
    "temperature": "degC",
    "other": "1",
}


@dataclass(frozen=True)
class Channel:
    """One column of a stream.

    `delay_s` is the age of the value at its row's tick (positive: the value is older than the tick),
    the sum of converter delay and skew within the row. `low_raw` and `high_raw` are the first values
    that mean "saturated". A `crank angle` channel counts on across turns (unwrapped, int32).
    """

    name: str
    measures: str
    unit: str
    scale: float
    offset: float = 0.0
    delay_s: float = 0.0
    low_raw: int = -(2**31)
    high_raw: int = 2**31 - 1
    calibration: str = "nominal"

    def values(self, raw: NDArray[np.integer]) -> NDArray[np.float64]:
        """Scale raw integers of any shape to float64 in `unit`."""
        return np.asarray(raw, dtype=np.float64) * self.scale + self.offset

    def raw(self, value: float) -> float:
        """Inverse of `values` for one number, not rounded."""
        return (value - self.offset) / self.scale


@dataclass(frozen=True)
class ChannelTable:
    """Channels in column order, with look-up by name and by what they measure."""

    channels: tuple[Channel, ...]

    def __iter__(self) -> Iterator[Channel]:
        return iter(self.channels)

    def __len__(self) -> int:
        return len(self.channels)

    def index(self, name: str) -> int:
        """Column of the channel called `name`; KeyError if there is none."""
        for column, channel in enumerate(self.channels):
            if channel.name == name:
                return column
        raise KeyError(name)

    def measuring(self, measures: str) -> int | None:
        """Column of the first channel that measures `measures`, or None."""
        for column, channel in enumerate(self.channels):
            if channel.measures == measures:
                return column
        return None

    def __getitem__(self, column: int) -> Channel:
        return self.channels[column]
