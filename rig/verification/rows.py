"""Rows and their ticks: equally spaced but for what is told as lost."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rig.verification.check import counted

#: Board time follows from ticks by one division; both sides round once.
TIME_RELATIVE = 1e-12


@dataclass
class RowsFound:
    """What going through ticks and times showed; gaps are (tick of the row after, rows missing)."""

    rows: int = 0
    gaps: list[tuple[int, int]] = field(default_factory=list)
    backward: list[int] = field(default_factory=list)
    uneven: list[int] = field(default_factory=list)
    off_time: int = 0  # rows whose time does not follow from their tick
    first_off_time: int | None = None


def go_through(
    parts: Iterable[tuple[NDArray[np.uint64], NDArray[np.float64]]], tick_hz: int, period_ticks: int
) -> RowsFound:
    """Look at ticks and times part by part, shape (n,) each; a period of 0 is not known, and not looked at."""
    found = RowsFound()
    first: int | None = None
    last: int | None = None
    for tick, time_s in parts:
        if not len(tick):
            continue
        if first is None:
            first = int(tick[0])
        found.rows += len(tick)
        _times(found, tick, time_s, first, tick_hz)
        joined = tick if last is None else np.concatenate((np.array([last], dtype=np.uint64), tick))
        last = int(tick[-1])
        _steps(found, joined, period_ticks)
    return found


def _times(
    found: RowsFound, tick: NDArray[np.uint64], time_s: NDArray[np.float64], first: int, tick_hz: int
) -> None:
    wanted = (tick - np.uint64(first)).astype(np.float64) / tick_hz
    off = ~(np.abs(time_s - wanted) <= TIME_RELATIVE * wanted)  # also what is no number
    if off.any():
        found.off_time += int(off.sum())
        if found.first_off_time is None:
            found.first_off_time = int(tick[np.argmax(off)])


def _steps(found: RowsFound, tick: NDArray[np.uint64], period_ticks: int) -> None:
    forward = tick[1:] > tick[:-1]
    found.backward += [int(t) for t in tick[1:][~forward]]
    if not period_ticks:
        return
    step = np.where(forward, tick[1:] - tick[:-1], np.uint64(period_ticks))
    uneven = step % np.uint64(period_ticks) != 0
    found.uneven += [int(t) for t in tick[1:][uneven]]
    missing = step // np.uint64(period_ticks) - np.uint64(1)
    gap = ~uneven & (missing > 0)
    found.gaps += [(int(t), int(m)) for t, m in zip(tick[1:][gap], missing[gap], strict=True)]


def clock_problems(found: RowsFound) -> list[str]:
    """What is wrong with ticks and times by themselves."""
    problems = []
    if found.backward:
        problems.append(
            f"ticks do not increase in {counted(len(found.backward), 'place')}, first at {found.backward[0]}"
        )
    if found.uneven:
        problems.append(
            f"{counted(len(found.uneven), 'step')} of no whole number of row periods, first to tick {found.uneven[0]}"
        )
    if found.off_time:
        problems.append(
            f"{counted(found.off_time, 'time')} that cannot follow from the tick, first at tick {found.first_off_time}"
        )
    return problems


def loss_problems(
    found: RowsFound, losses: Iterable[tuple[int, ...]], first_tick: int, last_tick: int, period_ticks: int
) -> list[str]:
    """Whether rows, gaps and losses (tick of the row after, rows, frames, overruns) belong together."""
    problems = []
    told: dict[int, int] = {}
    for tick, rows, *_ in losses:
        if tick in told:
            problems.append(f"the loss before tick {tick} is told twice")
        told[tick] = rows
    gaps = dict(found.gaps)
    for tick, missing in gaps.items():
        if tick not in told:
            problems.append(f"{counted(missing, 'row')} missing before tick {tick}, and no loss is told")
        elif told[tick] != missing:
            problems.append(
                f"{counted(missing, 'row')} missing before tick {tick}, {told[tick]} told as lost"
            )
    problems += [
        f"{counted(rows, 'row')} told as lost before tick {tick}, none missing there"
        for tick, rows in told.items()
        if rows and tick not in gaps
    ]
    spanned = (last_tick - first_tick) // period_ticks + 1 if found.rows else 0
    lost = sum(told.values())
    if spanned - lost != found.rows:
        problems.append(
            f"{counted(found.rows, 'row')} in the file, the span of {spanned} less {lost} lost is {spanned - lost}"
        )
    return problems
