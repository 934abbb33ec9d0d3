"""What a trace is: a signal in columns of least and greatest values, in the unit it is read in."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.channels import Channel, ChannelTable
from rig.desk.model.columns import TurnMeans

Values = NDArray[np.float64]

FLAP = "flap rate"
CRANK = "crank angle"
BODY = "body angle"
#: What may be drawn, in this order: measured quantity, unit shown, units shown in one SI unit.
SHOWN: tuple[tuple[str, str, float], ...] = (
    (BODY, "deg", 180.0 / np.pi),
    ("motor voltage", "V", 1.0),
    ("vertical load", "N", 1.0),
    ("motor current", "A", 1.0),
    (FLAP, "Hz", 1.0),
    ("carriage height", "mm", 1e3),
)
UNITS = {measures: unit for measures, unit, _ in SHOWN}


@dataclass(frozen=True)
class Trace:
    """One signal: time in s since the start, least and greatest value of each column in `unit`, shape (n,).

    `broken` marks columns before which rows are missing: no line leads to them.
    """

    measures: str
    unit: str
    time_s: Values
    low: Values
    high: Values
    broken: NDArray[np.bool_]


@dataclass(frozen=True)
class Traces:
    """All signals of a span; `by` what they measure. `mean` is the body angle averaged over each crank turn.

    `newest` grows with every row that comes, so that a caller sees whether there is anything to draw.
    """

    by: dict[str, Trace]
    mean: Trace | None
    now_s: float
    newest: int


@dataclass(frozen=True)
class Recent:
    """The last rows as fine as they are kept: s, crank angle in rad, signals in their units; shapes (n,)."""

    time_s: Values
    crank_rad: Values
    by: dict[str, Trace]


def signals_of(table: ChannelTable) -> tuple[str, ...]:
    measured = {channel.measures for channel in table}
    if CRANK in measured:
        measured.add(FLAP)
    return tuple(measures for measures, _, _ in SHOWN if measures in measured)


def add_turns(by: dict[str, Trace], turns: TurnMeans, origin_s: float) -> Trace | None:
    """Adds the flap rate to the signals; the body angle averaged over each turn, if there is one."""
    if not len(turns.middle_s):
        return None
    time_s = turns.middle_s - origin_s
    by[FLAP] = Trace(FLAP, UNITS[FLAP], time_s, turns.flap_hz, turns.flap_hz, turns.broken)
    if BODY not in by:
        return None
    mean = np.degrees(turns.mean)
    return Trace(BODY, UNITS[BODY], time_s, mean, mean, turns.broken)


def trace_of_raw(
    channel: Channel,
    time_s: Values,
    low: NDArray[np.int32],
    high: NDArray[np.int32],
    broken: NDArray[np.bool_],
) -> Trace | None:
    """Raw columns in the unit shown; None if the channel is of no use in a picture."""
    one, other = channel.values(low), channel.values(high)
    if channel.scale < 0.0:
        one, other = other, one  # a negative scale turns them round
    return trace_of(channel, time_s, one, other, broken)


def trace_of(
    channel: Channel, time_s: Values, low: Values, high: Values, broken: NDArray[np.bool_]
) -> Trace | None:
    for measures, unit, factor in SHOWN:
        if measures == channel.measures:
            return Trace(measures, unit, time_s, low * factor, high * factor, broken)
    return None


def cut(trace: Trace, from_s: float, to_s: float) -> Trace:
    part = slice(*np.searchsorted(trace.time_s, (from_s, np.nextafter(to_s, np.inf))))
    return Trace(
        trace.measures, trace.unit, trace.time_s[part], trace.low[part], trace.high[part], trace.broken[part]
    )
