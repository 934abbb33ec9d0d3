"""The course of a run as a ladder: where each level stands, what is known of it, where the run is, what is next.

Two rails, rising levels on the left, falling ones on the right; the height is the flap rate, or the drive while no
flap rate is known. Visits to the same drive in the same direction share a rung. Plain data, to be drawn.
"""

from __future__ import annotations

import bisect
import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any, Protocol

from rig.desk.model.run_model import Rung, RunModel, TapMark
from rig.desk.model.wording import OUTCOME_SHAPES, filling, level_word, said, tap_details, tap_sentence

RISING, FALLING = "rising", "falling"
LEAST_SPAN = {"Hz": 4.0, "V": 1.0}
#: Room above and below the outermost rungs, as a share of the span.
ROOM = 0.08


class PlannedLevel(Protocol):
    """What is needed of a planned level (`rig.files.forecast.LevelForecast` has it)."""

    @property
    def direction(self) -> str: ...
    @property
    def drive_v(self) -> float: ...
    @property
    def flap_hz(self) -> float | None: ...


@dataclass(frozen=True)
class TapOnRung:
    """One tap: number, shape, one line about it, all about it."""

    tap: int
    outcome: str
    shape: str
    sentence: str
    details: str


@dataclass(frozen=True)
class Place:
    """One rung. `height` is in the ladder's unit; `flap` is "" while no flap rate is known there.

    `filling`: planned, open, hollow (undetermined), filled (stable), crossed (unstable or not held).
    """

    direction: str
    drive_v: float
    height: float
    drive: str
    flap: str
    word: str
    filling: str
    taps: tuple[TapOnRung, ...] = ()
    visits: int = 0
    here: bool = False
    next: bool = False
    details: str = ""


@dataclass(frozen=True)
class Ladder:
    """Everything to be drawn. `pointer`: where the run is on the axis, None if that is not known."""

    unit: str
    low: float
    high: float
    places: tuple[Place, ...]
    pointer: float | None
    pointer_direction: str
    pointer_words: str
    next_words: str


def ladder(model: RunModel, planned: Sequence[PlannedLevel] = ()) -> Ladder:
    """The ladder of a run, with the levels it was planned to visit (in their order)."""
    ahead = _ahead(model, planned)
    known = _known_pairs(model.rungs, planned)
    everything = [*(rung.drive_v for rung in model.rungs), *(one.drive_v for one in planned)]
    unit = "Hz" if known and all(_placed(volts, known) is not None for volts in everything) else "V"
    places = _visited(model, ahead, known, unit) + _planned(model, ahead, known, unit)
    low, high = _span([place.height for place in places], unit)
    pointer, direction, words = _pointer(model, unit)
    return Ladder(unit, low, high, tuple(places), pointer, direction, words, _next_words(model, ahead, known))


def taps_in_order(view: Ladder) -> list[int]:
    """Numbers of all taps in the order they were given."""
    return sorted(tap.tap for place in view.places for tap in place.taps)


def ticks(low: float, high: float, at_most: int) -> list[float]:
    """Round values between two ends, 1, 2 or 5 times a power of ten apart."""
    if not (math.isfinite(low) and math.isfinite(high)) or high <= low or at_most < 1:
        return []
    rough = (high - low) / at_most
    power = 10.0 ** math.floor(math.log10(rough))
    step = next(power * factor for factor in (1.0, 2.0, 5.0, 10.0) if power * factor >= rough * (1 - 1e-9))
    first = math.ceil(low / step - 1e-9)
    return [round(k * step, 10) for k in range(first, math.floor(high / step + 1e-9) + 1)]


def spread(wanted: Sequence[float], heights: Sequence[float], low: float, high: float) -> list[float] | None:
    """Middles of blocks that do not overlap within low and high, as near as can be to where each is wanted.

    None if they do not fit. Least squares in the moves, by pooling neighbours that collide.
    """
    if sum(heights) > high - low + 1e-9:
        return None
    order = sorted(range(len(wanted)), key=lambda at: wanted[at])
    pools: list[tuple[float, int, float]] = []  # sum of wanted tops, count, height in all
    for at in order:
        top, count, tall = wanted[at] - 0.5 * heights[at], 1, heights[at]
        while (
            pools and _top(pools[-1], low, high) + pools[-1][2] > _top((top, count, tall), low, high) + 1e-9
        ):
            before_top, before_count, before_tall = pools.pop()
            top += before_top - count * before_tall
            count += before_count
            tall += before_tall
        pools.append((top, count, tall))
    middles = [0.0] * len(wanted)
    placed = 0
    for pool in pools:
        edge = _top(pool, low, high)
        for at in order[placed : placed + pool[1]]:
            middles[at] = edge + 0.5 * heights[at]
            edge += heights[at]
        placed += pool[1]
    return middles


def _top(pool: tuple[float, int, float], low: float, high: float) -> float:
    """Top of a pool: the mean of what its blocks want, kept inside."""
    return min(max(pool[0] / pool[1], low), high - pool[2])


# -- heights -------------------------------------------------------------------------------------------


def _known_pairs(rungs: Iterable[Rung], planned: Iterable[PlannedLevel]) -> list[tuple[float, float]]:
    """Drive and flap rate of levels where both are known, measured before forecast; rising in drive."""
    told = {one.drive_v: one.flap_hz for one in planned if one.flap_hz is not None}
    told.update({rung.drive_v: rung.flap_hz for rung in rungs if rung.flap_hz is not None})
    return sorted(told.items())


def _placed(volts: float, known: Sequence[tuple[float, float]]) -> float | None:
    """Flap rate at a drive, on the line between its known neighbours; None if it cannot be told."""
    for drive, flap in known:
        if drive == volts:
            return flap
    if len(known) < 2:
        return None
    at = min(max(bisect.bisect([drive for drive, _ in known], volts), 1), len(known) - 1)
    (v0, f0), (v1, f1) = known[at - 1], known[at]
    return f0 + (f1 - f0) * (volts - v0) / (v1 - v0)


def _span(heights: Sequence[float], unit: str) -> tuple[float, float]:
    """Ends of the axis."""
    if not heights:
        return 0.0, LEAST_SPAN[unit]
    low, high = min(heights), max(heights)
    short = max(0.0, LEAST_SPAN[unit] - (high - low))
    room = ROOM * max(high - low, LEAST_SPAN[unit])
    return low - 0.5 * short - room, high + 0.5 * short + room


# -- visited -------------------------------------------------------------------------------------------


def _rail(direction: str) -> str:
    return FALLING if direction == FALLING else RISING


def _visited(
    model: RunModel, ahead: Sequence[PlannedLevel], known: Sequence[tuple[float, float]], unit: str
) -> list[Place]:
    visits: dict[tuple[str, float], list[Rung]] = {}
    for rung in model.rungs:
        visits.setdefault((_rail(rung.direction), rung.drive_v), []).append(rung)
    here = model.on_hand
    follows = (_rail(ahead[0].direction), ahead[0].drive_v) if ahead else None
    return [
        replace(
            _place(model, rungs, known, unit),
            here=here is not None and rungs[-1] is here,
            next=key == follows,
        )
        for key, rungs in visits.items()
    ]


@lru_cache(maxsize=4096)
def _tap(seconds: float, *fields: Any) -> TapOnRung:
    """A tap in words; kept, for a display asks ten times a second."""
    mark = TapMark(*fields)
    shape = OUTCOME_SHAPES.get(mark.outcome, "ring")
    return TapOnRung(mark.tap, mark.outcome, shape, tap_sentence(mark), tap_details(mark, seconds))


def _place(model: RunModel, rungs: list[Rung], known: Sequence[tuple[float, float]], unit: str) -> Place:
    last = rungs[-1]
    measured = [rung.flap_hz for rung in rungs if rung.flap_hz is not None]
    flap = measured[-1] if measured else _placed(last.drive_v, known)
    taps = tuple(_tap(model.seconds(mark.tick), *vars(mark).values()) for rung in rungs for mark in rung.taps)
    word = level_word(rungs)
    lines = [
        f"{last.drive_v:.2f} V {_rail(last.direction)}" + (", reference" if last.role == "reference" else "")
    ]
    lines += [f"flap rate {measured[-1]:.2f} Hz"] if measured else []
    lines += [", ".join(dict.fromkeys(filter(None, (word, said(last.state) if last.state else ""))))]
    if last.half_width_per_s is not None:
        lines.append(f"decay rate known to ± {last.half_width_per_s:.3f} 1/s")
    if len(rungs) > 1:
        lines.append(f"{len(rungs)} visits")
    return Place(
        _rail(last.direction),
        last.drive_v,
        flap if unit == "Hz" and flap is not None else last.drive_v,
        f"{last.drive_v:.2f} V",
        f"{measured[-1]:.1f} Hz" if measured else "",
        word,
        filling(rungs),
        taps,
        len(rungs),
        details="\n".join(lines),
    )


# -- planned -------------------------------------------------------------------------------------------


def _ahead(model: RunModel, planned: Sequence[PlannedLevel]) -> list[PlannedLevel]:
    """Planned levels not yet visited, in order. Levels are numbered as planned; one that is begun again after a
    trip has a number beyond the plan."""
    if model.phase in ("finished", "failed"):
        return []
    visited = [rung.level for rung in model.rungs if 0 <= rung.level < len(planned)]
    return list(planned[max(visited) + 1 :]) if visited else list(planned)


def _planned(
    model: RunModel, ahead: Sequence[PlannedLevel], known: Sequence[tuple[float, float]], unit: str
) -> list[Place]:
    taken = {(_rail(rung.direction), rung.drive_v) for rung in model.rungs}
    made: list[Place] = []
    for at, one in enumerate(ahead):
        key = (_rail(one.direction), one.drive_v)
        if key in taken:
            continue
        taken.add(key)
        flap = one.flap_hz if one.flap_hz is not None else _placed(one.drive_v, known)
        told = f"about {flap:.1f} Hz" if flap is not None else "flap rate not known"
        made.append(
            Place(
                key[0],
                one.drive_v,
                flap if unit == "Hz" and flap is not None else one.drive_v,
                f"{one.drive_v:.2f} V",
                f"{flap:.1f} Hz" if flap is not None else "",
                "next" if at == 0 else "planned",
                "planned",
                next=at == 0,
                details=f"{one.drive_v:.2f} V {key[0]}\nplanned, {told}",
            )
        )
    return made


def _next_words(model: RunModel, ahead: Sequence[PlannedLevel], known: Sequence[tuple[float, float]]) -> str:
    """What comes next, in a line."""
    if model.phase == "waiting" and model.rungs:
        return f"on going on: {model.rungs[-1].drive_v:.2f} V again"
    if model.phase in ("finished", "failed", "turning", "stopping"):
        return ""
    if not ahead:
        return "next: the drive ramps down" if model.rungs else ""
    one = ahead[0]
    flap = one.flap_hz if one.flap_hz is not None else _placed(one.drive_v, known)
    about = f", {flap:.1f} Hz" if flap is not None else ""
    return f"next: {one.drive_v:.2f} V {_rail(one.direction)}{about}"


def _pointer(model: RunModel, unit: str) -> tuple[float | None, str, str]:
    """Where the run is on the axis, on which side, and the number that stands there."""
    if model.phase not in ("running", "stopping", "turning", "ready", "waiting") or model.origin_tick is None:
        return None, "", ""
    direction = _rail(model.rungs[-1].direction) if model.rungs else RISING
    if unit == "Hz":
        flap = model.flap_hz
        return (None, "", "") if flap is None else (round(flap, 2), direction, f"{flap:.1f}")
    here = model.on_hand
    return (None, "", "") if here is None else (here.drive_v, direction, f"{here.drive_v:.2f}")
