"""Ticks and losses: what fits is let pass, whatever does not is told, however the rows come in parts."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rig.verification.rows import RowsFound, clock_problems, go_through, loss_problems

PERIOD, HZ = 100, 1_000_000


def ticks_of(stretches: list[tuple[int, int]], first: int) -> tuple[list[int], list[tuple[int, ...]]]:
    """Ticks and losses of stretches of (rows, lost before them)."""
    ticks: list[int] = []
    losses: list[tuple[int, ...]] = []
    tick = first
    for rows, lost in stretches:
        if ticks and lost:
            tick += lost * PERIOD
            losses.append((tick, lost, 1, 0))
        elif ticks:
            losses.append((tick, 0, 0, 3))  # an overrun without a row lost
        ticks += range(tick, tick + rows * PERIOD, PERIOD)
        tick += rows * PERIOD
    return ticks, losses


def looked_at(ticks: list[int], part_rows: int, times: np.ndarray | None = None) -> RowsFound:
    tick = np.array(ticks, dtype=np.uint64)
    time_s = (tick - tick[0]).astype(float) / HZ if times is None else times

    def parts() -> Iterator[tuple[np.ndarray, np.ndarray]]:
        for start in range(0, len(tick), part_rows):
            yield tick[start : start + part_rows], time_s[start : start + part_rows]

    return go_through(parts(), HZ, PERIOD)


STRETCHES = st.lists(st.tuples(st.integers(1, 9), st.integers(0, 5)), min_size=1, max_size=8)


@given(STRETCHES, st.integers(1, 7), st.sampled_from([0, 12345, 2**32 - 700, 2**60]))
def test_rows_with_their_losses_are_sound(
    stretches: list[tuple[int, int]], part_rows: int, first: int
) -> None:
    ticks, losses = ticks_of(stretches, first)
    found = looked_at(ticks, part_rows)
    assert found == looked_at(ticks, 10**6)
    assert found.rows == len(ticks) and not clock_problems(found)
    assert found.gaps == [(tick, rows) for tick, rows, *_ in losses if rows]
    assert not loss_problems(found, losses, ticks[0], ticks[-1], PERIOD)


@given(STRETCHES, st.data())
def test_a_row_less_is_told_wherever_it_was(stretches: list[tuple[int, int]], data: st.DataObject) -> None:
    ticks, losses = ticks_of(stretches, 5000)
    if len(ticks) < 3:
        return
    gone = data.draw(st.integers(1, len(ticks) - 2))
    fewer = [tick for index, tick in enumerate(ticks) if index != gone]
    found = looked_at(fewer, 4)
    assert not clock_problems(found)
    assert loss_problems(found, losses, fewer[0], fewer[-1], PERIOD)


@given(STRETCHES, st.data())
def test_any_other_loss_is_told(stretches: list[tuple[int, int]], data: st.DataObject) -> None:
    ticks, losses = ticks_of(stretches, 5000)
    real = [index for index, loss in enumerate(losses) if loss[1]]
    if not real:
        return
    index = data.draw(st.sampled_from(real))
    found = looked_at(ticks, 4)
    tick, rows, *rest = losses[index]
    for other in ([], [(tick + PERIOD, rows, *rest)], [(tick, rows + 1, *rest)], [(tick, rows, *rest)] * 2):
        told = [*losses[:index], *other, *losses[index + 1 :]]
        assert loss_problems(found, told, ticks[0], ticks[-1], PERIOD)


@pytest.mark.parametrize("part_rows", [1, 2, 3, 50])
def test_steps_and_times_that_cannot_be(part_rows: int) -> None:
    even = list(range(1000, 3000, PERIOD))
    assert not clock_problems(looked_at(even, part_rows))
    back = [*even[:7], even[6], even[5], *even[9:]]
    assert looked_at(back, part_rows).backward == [even[6], even[5]]
    uneven = [*even[:7], *(tick + 30 for tick in even[7:])]
    assert looked_at(uneven, part_rows).uneven == [even[7] + 30]
    times = (np.array(even) - 1000) / HZ
    times[5] += 1e-9
    times[8] = np.nan
    found = looked_at(even, part_rows, times)
    assert (found.off_time, found.first_off_time) == (2, even[5])
    assert clock_problems(found) == ["2 times that cannot follow from the tick, first at tick 1500"]


def test_no_rows_at_all() -> None:
    found = go_through(iter(()), HZ, PERIOD)
    assert found == RowsFound() and not clock_problems(found)
    assert not loss_problems(found, [], 0, 0, PERIOD)
