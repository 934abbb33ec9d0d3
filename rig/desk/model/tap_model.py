"""One tap as it is shown: its picture, its numbers with intervals, and in a sentence what became of it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rig.desk.model.run_model import Rung, RunModel, TapMark
from rig.desk.model.wording import OUTCOME_SHAPES, OUTCOME_WORDS, said
from rig.report.rounding import (
    NOT_KNOWN,
    bare,
    decimals_for,
    fixed,
    half_width_text,
    known,
    std_of,
    value_text,
)
from rig.report.wording import DIRECTION_SIGNS, sentence
from rig.results import Measured

Values = NDArray[np.float64]

#: Decimals of rates in 1/s and Hz: more cannot be read at arm's length.
DECIMALS = 3
FIRM = "\N{NO-BREAK SPACE}"


@dataclass(frozen=True)
class TapCurves:
    """What is drawn; s since the tap, deg. `used_s` is the interval fitted, None without one."""

    time_s: Values
    low_deg: Values
    high_deg: Values
    mean_time_s: Values
    mean_deg: Values
    model_time_s: Values
    model_deg: Values
    residual_deg: Values
    used_s: tuple[float, float] | None


@dataclass(frozen=True)
class TapPage:
    """Tap `number`, at `place` (from 1) of `count`, whose numbers go from `first` to `last`.

    `missing` says why there is no picture or no fit, or is empty.
    """

    number: int
    place: int
    count: int
    first: int
    last: int
    level: str
    shape: str
    outcome: str
    decay: str
    mode: str
    returned: str
    regime: str
    sentence: str
    curves: TapCurves | None
    missing: str


def tap_numbers(model: RunModel) -> list[int]:
    """Numbers of all taps so far, in order."""
    found = {mark.tap for rung in model.rungs for mark in rung.taps} | set(model.pictures)
    return sorted(found)


def tap_page(model: RunModel, number: int) -> TapPage | None:
    """The page of a tap; None if there is no such tap."""
    numbers = tap_numbers(model)
    if number not in numbers:
        return None
    picture = model.pictures.get(number)
    result: Mapping[str, Any] = picture["tap"] if picture is not None else {}
    rung, mark = _place(model, number)
    decay = _measured(result.get("decay_per_s"), mark)
    curves = None if picture is None else _curves(picture)
    reason = _reason(result, mark)
    return TapPage(
        number=number,
        place=numbers.index(number) + 1,
        count=len(numbers),
        first=numbers[0],
        last=numbers[-1],
        level=_level(rung),
        shape=OUTCOME_SHAPES.get("" if mark is None else mark.outcome, "ring"),
        outcome="" if mark is None else OUTCOME_WORDS.get(mark.outcome, mark.outcome),
        decay=in_interval(decay, "1/s"),
        mode=in_interval(_measured(result.get("mode_hz")), "Hz"),
        returned=_returned(result, mark),
        regime=said(rung.regime) if rung is not None and rung.regime else NOT_KNOWN,
        sentence=_sentence(result, mark, reason),
        curves=curves,
        missing=_missing(curves, result, mark, reason),
    )


def in_interval(measured: Measured, unit: str) -> str:
    """ "0.774 ±0.010 1/s (95 %)"."""
    words = number_words(measured, unit, DECIMALS)
    return words if measured.low is None or words == NOT_KNOWN else f"{words}{FIRM}(95{FIRM}%)"


def number_words(measured: Measured, unit: str, most_decimals: int) -> str:
    """ "0.774 ±0.010 1/s": the value and its 95 % interval; both ends where the value does not lie in its middle."""
    if not known(measured.value):
        return NOT_KNOWN
    value, width = value_text(measured, most_decimals), half_width_text(measured, most_decimals)
    low, high = measured.low, measured.high
    if not width.startswith("±") and low is not None and high is not None:
        std = std_of(measured)
        places = most_decimals if std is None else min(decimals_for(std), most_decimals)
        return f"{value} {unit} ({fixed(low, places)} to {fixed(high, places)})".replace(" ", FIRM)
    return f"{value} {width} {unit}".replace("  ", " ").replace(" ", FIRM)


def _place(model: RunModel, number: int) -> tuple[Rung | None, TapMark | None]:
    for rung in model.rungs:
        for mark in rung.taps:
            if mark.tap == number:
                return rung, mark
    return None, None


def _level(rung: Rung | None) -> str:
    if rung is None:
        return ""
    where = f"{DIRECTION_SIGNS.get(rung.direction, '')} {rung.direction} {bare(rung.drive_v)} V".strip()
    return f"{where}, {said(rung.regime)}" if rung.regime else where


def _measured(told: Mapping[str, Any] | None, mark: TapMark | None = None) -> Measured:
    if told is not None:
        return Measured(*(told.get(name) for name in ("value", "std", "low", "high")))
    if mark is not None and mark.decay_per_s is not None:
        if mark.decay_std_per_s is not None:
            return Measured.normal(mark.decay_per_s, mark.decay_std_per_s)
        return Measured(mark.decay_per_s)
    return Measured()


def _returned(result: Mapping[str, Any], mark: TapMark | None) -> str:
    if result:
        return "returned" if result.get("returned") else "did not return"
    if mark is None or mark.outcome == "observed":
        return ""
    return "did not return" if mark.outcome == "lost" else "returned" if mark.outcome == "accepted" else ""


def _reason(result: Mapping[str, Any], mark: TapMark | None) -> str:
    if mark is not None and mark.outcome == "excluded":
        reason = mark.reason.removeprefix("excluded by the operator").lstrip(": ")
        return "excluded by the operator" + (f": {reason}" if reason else "")
    told = str(result.get("reason") or ("" if mark is None else mark.reason))
    return told.replace("+-", "±")


def _sentence(result: Mapping[str, Any], mark: TapMark | None, reason: str) -> str:
    """What became of it, and why."""
    if not result and (mark is None or mark.outcome == "observed"):
        return "The body is watched until it has come to rest or is lost."
    counted = bool(result.get("accepted")) if result else mark is not None and mark.outcome == "accepted"
    if mark is not None and mark.outcome == "excluded":
        counted = False
    counts = "counts for the decay rate" if counted else "left out of the decay rate"
    return sentence(f"{reason}; {counts}" if reason else counts)


def _missing(curves: TapCurves | None, result: Mapping[str, Any], mark: TapMark | None, reason: str) -> str:
    if curves is None:
        watched = mark is not None and mark.outcome == "observed"
        return "under observation" if watched else "the picture is being made"
    if len(curves.model_deg):
        return ""
    status = str(result.get("status") or "").replace("_", " ")
    why = reason or status
    return f"no fit: {why}" if why else "no fit"


def _curves(picture: Mapping[str, Any]) -> TapCurves:
    start, end = picture.get("from_s"), picture.get("to_s")
    names = ("time_s", "low_deg", "high_deg", "mean_time_s", "mean_deg")
    fitted = ("model_time_s", "model_deg", "residual_deg")
    arrays = {name: _array(picture.get(name, ())) for name in (*names, *fitted)}
    used = None if start is None or end is None else (float(start), float(end))
    return TapCurves(**arrays, used_s=used)


def _array(values: Sequence[float]) -> Values:
    return np.asarray(values, dtype=np.float64)
