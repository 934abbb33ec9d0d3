"""A stretch of the record in the terms of the estimators: time, body angle, crank phase, end stops."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analysis.decay.record import TapRecord
from analysis.state import BodyState, assess
from rig.description import RigDescription
from rig.evaluation.stream import RowStore

Values = NDArray[np.float64]

#: Fewest rows that the state of the body can be told from.
FEWEST_ROWS = 50


@dataclass(frozen=True)
class Window:
    """Rows of one stretch: s since the first row of the session, rad."""

    rows: slice
    time_s: Values
    angle_rad: Values
    crank_rad: Values | None

    def __len__(self) -> int:
        return len(self.time_s)

    @property
    def span_s(self) -> float:
        return float(self.time_s[-1] - self.time_s[0]) if len(self.time_s) > 1 else 0.0

    def after(self, time_s: float) -> Window:
        """The part from `time_s` on."""
        start = int(np.searchsorted(self.time_s, time_s))
        rows = slice(self.rows.start + start, self.rows.stop)
        crank = None if self.crank_rad is None else self.crank_rad[start:]
        return Window(rows, self.time_s[start:], self.angle_rad[start:], crank)

    def record(self) -> TapRecord:
        return TapRecord(self.time_s, self.angle_rad, self.crank_rad)


def window(store: RowStore, start_tick: int, end_tick: int) -> Window:
    """Rows with start_tick <= tick < end_tick."""
    rows = store.rows(start_tick, end_tick)
    angle = store.values("body angle", rows)
    assert angle is not None  # a rig without body angle does not pass its reader
    return Window(rows, store.time_s(rows), angle, store.values("crank angle", rows))


def state_of(part: Window, rig: RigDescription) -> BodyState | None:
    """State of the body over a window; None where it is too short to tell."""
    if len(part) < FEWEST_ROWS:
        return None
    stops = (rig.stops.low_rad, rig.stops.high_rad)
    return assess(
        part.time_s, part.angle_rad, part.crank_rad, stops_rad=stops, resolution_rad=resolution(rig)
    )


def resolution(rig: RigDescription) -> float:
    """Smallest step of the body encoder, rad."""
    for channel in rig.channels:
        if channel.measures == "body angle":
            return abs(channel.scale)
    return 2.0 * np.pi / 8192
