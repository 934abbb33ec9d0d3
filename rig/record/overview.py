"""Smallest and largest raw value of every 16, 256, 4096 ... rows, so that an hour is drawn at once.

A pyramid of a column is {rows per bin: int32 array (bins, 2) of [smallest, largest]}. Its bins begin at the
first row; the last one may hold fewer rows. Levels end with the first that has fewer than FEWEST_BINS bins; a
column of fewer rows than that has none.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

FACTOR = 16
FEWEST_BINS = 2000

Raw = NDArray[np.int32]


def levels(rows: int) -> list[int]:
    """Rows per bin of the levels a column of `rows` rows has, finest first."""
    found: list[int] = []
    rows_per_bin = 1
    while bins_of(rows, rows_per_bin) >= FEWEST_BINS:
        rows_per_bin *= FACTOR
        found.append(rows_per_bin)
    return found


def bins_of(rows: int, rows_per_bin: int) -> int:
    """How many bins hold `rows` rows."""
    return -(-rows // rows_per_bin)


def of_rows(raw: Raw, rows_per_bin: int) -> Raw:
    """Raw values (n,) to bins (ceil(n / rows_per_bin), 2)."""
    starts = np.arange(0, len(raw), rows_per_bin)
    if not len(starts):
        return np.empty((0, 2), dtype=np.int32)
    return np.column_stack((np.minimum.reduceat(raw, starts), np.maximum.reduceat(raw, starts)))


def of_bins(bins: Raw, factor: int) -> Raw:
    """Bins (n, 2) to coarser ones (ceil(n / factor), 2)."""
    starts = np.arange(0, len(bins), factor)
    if not len(starts):
        return np.empty((0, 2), dtype=np.int32)
    low, high = np.minimum.reduceat(bins[:, 0], starts), np.maximum.reduceat(bins[:, 1], starts)
    return np.column_stack((low, high))


def pyramid(parts: Iterable[Raw], rows: int) -> dict[int, Raw]:
    """All levels of a column of `rows` rows that is given in parts, in order."""
    wanted = levels(rows)
    if not wanted:
        return {}
    finest: list[Raw] = []
    rest = np.empty(0, dtype=np.int32)
    for part in parts:
        values = np.concatenate((rest, part)) if len(rest) else part
        whole = len(values) - len(values) % FACTOR
        finest.append(of_rows(values[:whole], FACTOR))
        rest = values[whole:]
    finest.append(of_rows(rest, FACTOR))
    found = {FACTOR: np.concatenate(finest)}
    for rows_per_bin in wanted[1:]:
        found[rows_per_bin] = of_bins(found[rows_per_bin // FACTOR], FACTOR)
    return found


def coarsest(available: Sequence[int], first: int, end: int, bins: int) -> int:
    """Rows per bin of the coarsest level that cuts rows first..end-1 into `bins` bins or more; 1: the rows."""
    fitting = [size for size in available if bins_of(end, size) - first // size >= bins]
    return max(fitting, default=1)
