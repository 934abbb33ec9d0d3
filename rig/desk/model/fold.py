"""The last turns of the crank laid over each other: each signal against the crank phase."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rig.desk.model.signals import Recent

Values = NDArray[np.float64]
#: Phases told apart; at 1 kHz and 30 turns a second a turn has 33 rows, and successive turns fill the rest.
COLUMNS = 90
FEWEST_TURNS = 2


@dataclass(frozen=True)
class FoldedSignal:
    """One signal over the phase: `phase_deg`, `low`, `high`, `mean` over all turns, shape (n,); and the newest whole
    turn alone, `last_phase_deg` and `last`, shape (m,)."""

    measures: str
    unit: str
    phase_deg: Values
    low: Values
    high: Values
    mean: Values
    last_phase_deg: Values
    last: Values


@dataclass(frozen=True)
class Folded:
    """So many whole turns; `by` what is measured."""

    by: dict[str, FoldedSignal]
    turns: int


def fold(recent: Recent, columns: int = COLUMNS) -> Folded | None:
    """The whole turns among the last rows on 0 to 360 deg of crank phase; None below two turns.

    Where rows are missing the rows around them still tell their phase, so nothing is left out for a loss.
    """
    turn = recent.crank_rad / (2.0 * np.pi)
    if len(turn) < 2:
        return None
    if turn[-1] < turn[0]:
        turn = -turn  # a crank that counts down: its phase still runs from 0 to 360
    first, end = np.ceil(turn[0]), np.floor(turn[-1])
    turns = int(end - first)
    if turns < FEWEST_TURNS:
        return None
    inside = (turn >= first) & (turn < end)
    phase = 360.0 * (turn[inside] % 1.0)
    newest = turn[inside] >= end - 1.0
    place = np.minimum((phase * columns / 360.0).astype(np.intp), columns - 1)
    order = np.argsort(place, kind="stable")
    starts = np.flatnonzero(np.diff(place[order], prepend=-1))
    sizes = np.diff(np.append(starts, len(order)))
    # The middle of the rows that are there, not of the column: at a rate that locks to the rows they sit apart.
    where = np.add.reduceat(phase[order], starts) / sizes
    ahead = np.argsort(phase[newest], kind="stable")
    by = {}
    for measures, trace in recent.by.items():
        low, high = trace.low[inside], trace.high[inside]
        middle = 0.5 * (low + high)
        by[measures] = FoldedSignal(
            measures,
            trace.unit,
            where,
            np.minimum.reduceat(low[order], starts),
            np.maximum.reduceat(high[order], starts),
            np.add.reduceat(middle[order], starts) / sizes,
            phase[newest][ahead],
            middle[newest][ahead],
        )
    return Folded(by, turns)
