"""What a display shows of a session under way: the tap just analysed, and the map as far as it has grown.

Plain JSON, a few hundred points each, made by the analysis so that no display has to fit anything.

    tap picture   {"tap": {TapResult}, "time_s": [...], "low_deg": [...], "high_deg": [...],     since the tap
                   "mean_time_s", "mean_deg": [...]                                 over each turn of the crank
                   "model_time_s", "model_deg", "residual_deg": [...], "from_s", "to_s": interval used}
    map           {"levels": [{LevelResult}], "falling": {...}, "rising": {...}, "fit_curve": [[Hz, 1/s^2, deg]]}
    theory        {"averaged_fold_hz", "curve": [[Hz, 1/s^2, deg]]}             (`rig.evaluation.theory_picture`)
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from analysis.boundary.falling import falling_boundary
from analysis.boundary.rising import rising_boundary
from analysis.decay.slow import slow_model
from analysis.position import turn_means
from rig.evaluation.analyst import Analyst
from rig.evaluation.conclusions import fit_curve, told_boundary
from rig.evaluation.evidence import level_points, rig_constants
from rig.evaluation.stream import RowStore
from rig.evaluation.tap import TapAnalysis
from rig.evaluation.window import window

Fields = dict[str, Any]
BEFORE_S, AFTER_S = 0.6, 0.3
MOST_POINTS = 400


def tap_picture(store: RowStore, tap: TapAnalysis) -> Fields:
    """A tap with its rows, the model over them and what the model leaves over; times count from the tap."""
    result = tap.result
    tap_s = store.time_of(result.tick)
    until_s = result.end_s if result.end_s is not None else tap_s + 3.0
    hz = store.tick_hz
    end = int((until_s + AFTER_S) * hz) + store.first_tick
    part = window(store, result.tick - int(BEFORE_S * hz), min(end, store.last_tick + 1))
    picture: Fields = {"tap": result.to_json()}
    degrees = np.degrees(part.angle_rad)
    time_s = part.time_s - tap_s
    starts = _bins(len(time_s))
    picture["time_s"] = _list(time_s[starts])
    picture["low_deg"] = _list(np.minimum.reduceat(degrees, starts)) if len(starts) else []
    picture["high_deg"] = _list(np.maximum.reduceat(degrees, starts)) if len(starts) else []
    mean_s, mean_deg = time_s[:0], degrees[:0]
    if part.crank_rad is not None and len(part) > 2:
        mean_s, mean_deg = turn_means(time_s, degrees, part.crank_rad)
    picture["mean_time_s"], picture["mean_deg"] = _list(mean_s), _list(mean_deg)
    picture["from_s"] = None if result.start_s is None else round(result.start_s - tap_s, 4)
    picture["to_s"] = None if result.end_s is None else round(result.end_s - tap_s, 4)
    fit = tap.fit
    shown = fit is not None and len(fit.time_s) > 2 and result.start_s is not None
    model_s = model = residual = np.zeros(0)
    if shown and fit is not None and result.start_s is not None:
        keep = _bins(len(fit.time_s))
        model_s = fit.time_s[keep] - fit.time_s[0] + result.start_s - tap_s
        model, residual = np.degrees(slow_model(fit))[keep], np.degrees(fit.residual_rad)[keep]
    picture["model_time_s"], picture["model_deg"] = _list(model_s), _list(model)
    picture["residual_deg"] = _list(residual)
    return picture


def standing_map(analyst: Analyst) -> Fields:
    """Levels and boundaries as far as they are known."""
    evidence = analyst.evidence()
    points = level_points(evidence)
    falling = falling_boundary(points, rig_constants(evidence.rig))
    return {
        "levels": [level.to_json() for level in evidence.levels],
        "falling": told_boundary(falling).to_json(),
        "rising": told_boundary(rising_boundary(points)).to_json(),
        "fit_curve": [list(point) for point in fit_curve(falling, points)],
    }


def _bins(rows: int) -> NDArray[np.intp]:
    """First row of each of at most MOST_POINTS bins."""
    count = min(rows, MOST_POINTS)
    return (np.arange(count) * rows // max(count, 1)).astype(np.intp)


def _list(values: NDArray[np.float64]) -> list[float]:
    return [round(float(value), 5) for value in values]
