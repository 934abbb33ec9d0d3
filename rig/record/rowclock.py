"""Which row has which tick, from the first tick, the row period and the losses: no column need be read."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import NDArray


class RowClock:
    """Rows of one stream, equally spaced but for what was lost.

    `losses` are (tick of the row after, rows lost) in order. ValueError if they do not fit together: then only
    the ticks themselves can tell.
    """

    def __init__(
        self, first_tick: int, last_tick: int, rows: int, period_ticks: int, losses: Iterable[tuple[int, int]]
    ) -> None:
        if period_ticks < 1 or rows < 1:
            raise ValueError("no rows, or no row period")
        self.rows = rows
        self.period_ticks = period_ticks
        starts, ticks, lost = [0], [first_tick], 0
        for tick, count in losses:
            lost += count
            row, rest = divmod(tick - first_tick, period_ticks)
            row -= lost
            if rest or not starts[-1] < row < rows:
                raise ValueError(f"the loss before tick {tick} does not fit")
            starts.append(row)
            ticks.append(tick)
        self._starts = np.array(starts, dtype=np.int64)
        self._ticks = np.array(ticks, dtype=np.int64)
        if self.tick(np.array([rows - 1]))[0] != last_tick:
            raise ValueError("the last tick does not follow from the losses")

    def tick(self, rows: NDArray[np.int64]) -> NDArray[np.int64]:
        """Ticks of rows by number."""
        part = np.searchsorted(self._starts, rows, side="right") - 1
        return self._ticks[part] + (rows - self._starts[part]) * self.period_ticks

    def row(self, tick: int) -> int:
        """Number of the first row at or after a tick; the number of rows if there is none."""
        part = max(int(np.searchsorted(self._ticks, tick, side="right")) - 1, 0)
        end = int(self._starts[part + 1]) if part + 1 < len(self._starts) else self.rows
        ahead = -(-(tick - int(self._ticks[part])) // self.period_ticks)
        return min(int(self._starts[part]) + max(ahead, 0), end)
