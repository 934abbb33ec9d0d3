"""The stability map as far as it has grown: levels, boundaries and curves, ready to be drawn and told."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rig.desk.model.run_model import Rung, RunModel
from rig.desk.model.tap_model import DECIMALS, FIRM, number_words
from rig.desk.model.wording import OUTCOME_WORDS, said
from rig.report.rounding import bare, known, value_text
from rig.report.wording import DIRECTION_SIGNS
from rig.results import Measured

Values = NDArray[np.float64]

#: A level's place in a session and its event differ by rounding only.
SAME_S = 0.05
#: An interval wider than this share of all values does not set the range: it would flatten the rest.
WIDE_SHARE = 0.6
DIRECTIONS = ("falling", "rising")
#: States in which nothing holds the body.
AWAY = ("at_stop", "bouncing", "lost")
#: What is shown before there is a level: Hz^2 and 1/s^2; with a theory, so much of it beside its fold.
EMPTY_SQUARE, EMPTY_STIFFNESS = (0.0, 1600.0), (-20.0, 100.0)
BESIDE_FOLD = (0.9, 1.5)


@dataclass(frozen=True)
class MapPoint:
    """One level. `shape` is filled (stable), hollow (undetermined) or crossed (unstable, or the body not held).

    `drive_v` is the drive asked for where the run's own level is known, else the measured one.
    """

    direction: str
    drive_v: float
    flap_hz: Measured
    stiffness_per_s2: Measured
    shape: str
    regime: str
    state: str
    words: str
    left_out: str

    @property
    def square(self) -> float:
        """Flap rate squared, Hz^2."""
        return (self.flap_hz.value or 0.0) ** 2

    @property
    def on_strip(self) -> bool:
        """Whether it has no stiffness and stands on the strip below."""
        return not known(self.stiffness_per_s2.value)


@dataclass(frozen=True)
class Band:
    """A boundary: where it lies and its 95 % interval, Hz, and what is said of it."""

    direction: str
    flap_hz: float
    low_hz: float | None
    high_hz: float | None
    words: str


@dataclass(frozen=True)
class MapPage:
    """Everything on the map. Curves are flap rate squared (Hz^2) and slow stiffness (1/s^2), shape (n,)."""

    points: tuple[MapPoint, ...]
    bands: tuple[Band, ...]
    fit: tuple[Values, Values]
    theory: tuple[Values, Values]


def map_page(model: RunModel) -> MapPage:
    """The map of a run, empty before its first level."""
    told = model.map
    points = [_point(level, model) for level in told.get("levels", ()) if _rate(level) is not None]
    points.sort(key=lambda point: (point.square, point.direction))
    bands = (_band(direction, told.get(direction)) for direction in DIRECTIONS)
    return MapPage(
        tuple(points),
        tuple(band for band in bands if band is not None),
        _curve(told.get("fit_curve", ())),
        _curve(model.theory.get("curve", ())),
    )


def squares_seen(page: MapPage) -> list[float]:
    """Flap rates squared that the range must hold, Hz^2; empty before there is a level."""
    rates: list[float | None] = []
    for point in page.points:
        rates += [point.flap_hz.value, point.flap_hz.low, point.flap_hz.high]
    for band in page.bands:
        rates += [band.flap_hz, band.low_hz, band.high_hz]
    found = [rate**2 for rate in rates if rate is not None and math.isfinite(rate)]
    if found and len(page.theory[0]):
        found.append(float(page.theory[0][0]))  # the fold itself is worth seeing beside the levels
    return found


def stiffness_seen(page: MapPage) -> list[float]:
    """Stiffnesses that the range must hold, 1/s^2, zero among them; empty before there is one."""
    numbers = [point.stiffness_per_s2 for point in page.points if not point.on_strip]
    values = [float(number.value) for number in numbers if number.value is not None]
    if not values:
        return []
    spread = max(max(values) - min(values), max(abs(value) for value in values), 1e-9)
    ends = [0.0, *values]
    for number in numbers:
        for end in (number.low, number.high):
            if end is not None and abs(end - float(number.value or 0.0)) < WIDE_SHARE * spread:
                ends.append(end)
    return ends


def empty_ranges(page: MapPage) -> tuple[tuple[float, float], tuple[float, float]]:
    """What is shown while there is nothing to hold: Hz^2, 1/s^2."""
    square, stiffness = page.theory
    if not len(square):
        return EMPTY_SQUARE, EMPTY_STIFFNESS
    left, right = BESIDE_FOLD[0] * float(square[0]), BESIDE_FOLD[1] * float(square[0])
    top = float(np.interp(right, square, stiffness))
    return (left, right), (-0.2 * top, 1.1 * top)


def hertz_marks(low_square: float, high_square: float, most: int) -> list[tuple[float, str]]:
    """Round flap rates at their squares, no two closer than a `most`-th of the width: low rates crowd there."""
    low, high = math.sqrt(max(low_square, 0.0)), math.sqrt(max(high_square, 0.0))
    step = next((size for size in (1, 2, 5, 10, 20, 50) if (high - low) / size <= most), 100)
    kept: list[tuple[float, str]] = []
    for rate in range(math.floor(high / step) * step, math.ceil(low / step) * step - 1, -step):
        if not kept or kept[-1][0] - rate**2 >= (high_square - low_square) / max(most, 1):
            kept.append((float(rate**2), str(rate)))
    return kept[::-1]


def _measured(told: Mapping[str, Any] | None) -> Measured:
    return Measured(*((told or {}).get(name) for name in ("value", "std", "low", "high")))


def _rate(level: Mapping[str, Any]) -> float | None:
    value = _measured(level.get("flap_hz")).value
    return value if known(value) else None


def _point(level: Mapping[str, Any], model: RunModel) -> MapPoint:
    rungs = _rungs(level, model)
    drive = _measured(level.get("drive_v"))
    flap, stiffness = _measured(level.get("flap_hz")), _measured(level.get("stiffness_per_s2"))
    direction, regime = str(level.get("direction", "")), str(level.get("regime") or "undetermined")
    state = str(level.get("state", ""))
    under_way = bool(rungs) and not rungs[-1].ended
    if under_way:
        # A table of results takes a level that has not ended for one that was lost; the verdicts know better.
        regime, state = rungs[-1].regime or "undetermined", rungs[-1].state
    crossed = regime == "unstable" or state in AWAY
    asked = rungs[0].drive_v if rungs else float(drive.value or 0.0)
    words = [
        f"{DIRECTION_SIGNS.get(direction, '')} {direction} {bare(asked)}{FIRM}V: {value_text(flap, 2)}{FIRM}Hz"
    ]
    if known(stiffness.value):
        words.append(f"stiffness {number_words(stiffness, '1/s²', 1)}")
    decay = _measured(level.get("decay_per_s"))
    if known(decay.value):
        words.append(f"decay {number_words(decay, '1/s', DECIMALS)}")
    taps = int(level.get("taps") or 0)
    if taps:
        words.append(f"{level.get('returned', 0)} of {taps} returned")
    words.append(said(regime) if state in ("held", "") else f"{said(regime)}, {said(state)}")
    if under_way:
        words.append("under way")
    return MapPoint(
        direction,
        asked,
        flap,
        stiffness,
        "crossed" if crossed else "filled" if regime == "stable" else "hollow",
        regime,
        state,
        ", ".join(words),
        _left_out(rungs),
    )


def _rungs(level: Mapping[str, Any], model: RunModel) -> list[Rung]:
    """All visits to the level, found by the time of its first one, else by its drive."""
    same = [rung for rung in model.rungs if rung.direction == level.get("direction")]
    start_s, drive = level.get("start_s"), _measured(level.get("drive_v")).value
    first = None
    if start_s is not None:
        first = next((rung for rung in same if abs(model.seconds(rung.tick) - start_s) < SAME_S), None)
    if first is None and drive is not None and same:
        first = min(same, key=lambda rung: abs(rung.drive_v - drive))
    if first is None:
        return []
    return [rung for rung in same if rung.drive_v == first.drive_v and rung.role == first.role]


def _left_out(rungs: Sequence[Rung]) -> str:
    """A line for each tap that does not count, and why."""
    lines = []
    for rung in rungs:
        for mark in rung.taps:
            if mark.outcome not in ("accepted", "observed"):
                outcome = OUTCOME_WORDS.get(mark.outcome, mark.outcome)
                reason = mark.reason.replace("+-", "±")
                lines.append(f"Tap {mark.tap} {outcome}" + (f": {reason}" if reason else ""))
    return "\n".join(lines)


def _band(direction: str, told: Mapping[str, Any] | None) -> Band | None:
    rate = _measured((told or {}).get("flap_hz"))
    if told is None or told.get("kind") == "not_located" or rate.value is None or not known(rate.value):
        return None
    return Band(
        direction,
        rate.value,
        rate.low,
        rate.high,
        f"{direction} boundary {number_words(rate, 'Hz', 2)}",
    )


def _curve(told: Sequence[Sequence[float]]) -> tuple[Values, Values]:
    points = np.asarray([point[:2] for point in told], dtype=np.float64).reshape(-1, 2)
    return points[:, 0] ** 2, points[:, 1]
