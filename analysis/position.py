"""Mean position of the body: its angle averaged over whole crank turns."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analysis.flap import turn_times
from analysis.longrun import mean_variance

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class TurnMean:
    """A mean over whole turns, in the unit of the signal, with its standard uncertainty.

    status: "ok", or "too_short": less than two whole turns; `value` is then a plain mean.
    """

    value: float
    std: float
    turns: int
    status: str = "ok"


def turn_means(time_s: ArrayLike, signal: ArrayLike, crank_rad: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Mean of a signal over each whole crank turn: (middle of the turn in s, mean), shape (turns,)."""
    marks, areas = _turn_areas(time_s, signal, crank_rad)
    return 0.5 * (marks[1:] + marks[:-1]), areas / np.diff(marks)


def mean_over_turns(time_s: ArrayLike, signal: ArrayLike, crank_rad: ArrayLike) -> TurnMean:
    """Mean of a signal over all whole turns; std from the turn-by-turn means and their correlation."""
    marks, areas = _turn_areas(time_s, signal, crank_rad)
    if len(areas) < 2:
        return TurnMean(
            float(np.mean(np.asarray(signal, dtype=float))), float("nan"), len(areas), "too_short"
        )
    value = float(np.sum(areas)) / float(marks[-1] - marks[0])
    return TurnMean(value, float(np.sqrt(mean_variance(areas / np.diff(marks)))), len(areas))


def _turn_areas(time_s: ArrayLike, signal: ArrayLike, crank_rad: ArrayLike) -> tuple[FloatArray, FloatArray]:
    time, values = np.asarray(time_s, dtype=float), np.asarray(signal, dtype=float)
    if time.shape != values.shape:
        raise ValueError("time and signal must be of equal length")
    marks = turn_times(time, crank_rad)
    if len(marks) < 2:
        return marks, np.zeros(0)
    cumulative = np.concatenate(([0.0], np.cumsum(0.5 * (values[1:] + values[:-1]) * np.diff(time))))
    # Inside a sample interval the integral of a straight line is a parabola; a linear one would leave
    # (slope x step^2)/8 behind, which the large flap ripple makes visible.
    index = np.clip(np.searchsorted(time, marks, side="right") - 1, 0, len(time) - 2)
    into = marks - time[index]
    slope = (values[index + 1] - values[index]) / (time[index + 1] - time[index])
    return marks, np.diff(cumulative[index] + values[index] * into + 0.5 * slope * into**2)


def mean_position(time_s: ArrayLike, angle_rad: ArrayLike, crank_rad: ArrayLike | None = None) -> TurnMean:
    """Mean body angle (rad) over whole crank turns.

    Without a crank phase the plain mean of the record is taken, in blocks of 50 ms for its uncertainty.
    Slow ambient motion (the slow mode driven by random torque) is in the std as far as the window shows it:
    a window shorter than one slow period cannot show it.
    Raises ValueError for arrays of unequal length.
    """
    if crank_rad is not None:
        return mean_over_turns(time_s, angle_rad, crank_rad)
    time, values = np.asarray(time_s, dtype=float), np.asarray(angle_rad, dtype=float)
    if time.shape != values.shape or len(time) < 2:
        raise ValueError("time and angle must be of equal length, two samples or more")
    blocks = max(2, int((time[-1] - time[0]) / 0.05))
    means = np.array([float(part.mean()) for part in np.array_split(values, min(blocks, len(values)))])
    return TurnMean(float(values.mean()), float(np.sqrt(mean_variance(means))), 0)
