"""A session's streams as the few hundred points a printed page can show."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from rig.description import RigDescription

Values = NDArray[np.float64]
TWO_PI = 2.0 * np.pi


class Streams(Protocol):
    """One stream of a session: board time in s since its start, and channels in SI units by name."""

    @property
    def time_s(self) -> Values: ...

    def __getitem__(self, name: str) -> Any: ...


def channel(streams: Streams, rig: RigDescription, measures: str) -> Values | None:
    """The channel that measures a quantity ("body angle", ...), SI units, or None if the rig has none."""
    for described in rig.channels:
        if described.measures == measures:
            try:
                return np.asarray(streams[described.name], dtype=np.float64)
            except KeyError:
                return None
    return None


@dataclass(frozen=True)
class Binned:
    """A signal in bins of equal numbers of rows: centre in s, lowest, highest and mean value of each bin."""

    time_s: Values
    low: Values
    high: Values
    mean: Values


def bin_starts(rows: int, bins: int) -> NDArray[np.intp]:
    """First row of each bin, bins as equal as whole rows allow; never more bins than rows."""
    count = max(1, min(bins, rows))
    return (np.arange(count) * rows // count).astype(np.intp)


def binned(time_s: Values, values: Values, bins: int) -> Binned:
    """Lowest, highest and mean value in each of `bins` bins: extremes survive, unlike with thinning."""
    if len(values) == 0:
        empty = np.zeros(0)
        return Binned(empty, empty, empty, empty)
    starts = bin_starts(len(values), bins)
    sizes = np.diff(np.append(starts, len(values)))
    return Binned(
        np.add.reduceat(time_s, starts) / sizes,
        np.minimum.reduceat(values, starts),
        np.maximum.reduceat(values, starts),
        np.add.reduceat(values, starts) / sizes,
    )


def flap_course(time_s: Values, crank_rad: Values, bins: int) -> tuple[Values, Values]:
    """Mean flap rate (Hz) between successive bin starts, from the unwrapped crank phase: (time s, Hz)."""
    if len(time_s) < 2:
        return np.zeros(0), np.zeros(0)
    marks = np.append(bin_starts(len(time_s), bins), len(time_s) - 1)
    marks = np.unique(marks)
    span = np.diff(time_s[marks])
    turned = np.diff(crank_rad[marks]) / TWO_PI
    return 0.5 * (time_s[marks[1:]] + time_s[marks[:-1]]), turned / span


def zigzag(part: Binned) -> tuple[Values, Values]:
    """Lowest and highest value of each bin in turn: a line that shows a fast oscillation's full height."""
    return np.repeat(part.time_s, 2), np.column_stack((part.low, part.high)).ravel()
