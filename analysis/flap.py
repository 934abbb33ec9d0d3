"""Flap rate: crank turns per second, over a dwell and turn by turn."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analysis.longrun import mean_variance

FloatArray = NDArray[np.float64]
TURN = 2.0 * np.pi


@dataclass(frozen=True)
class FlapRate:
    """Mean flap rate over a window: Hz, its standard uncertainty, whole turns used, and how it went.

    status: "ok", "too_short" (less than two turns), "standstill" (the crank does not turn).
    """

    value: float
    std: float
    turns: int
    status: str = "ok"


def unwrap_crank(time_s: ArrayLike, crank_rad: ArrayLike) -> FloatArray:
    """Continuous crank phase in rad from a wrapped or unwrapped one, across lost samples too.

    The phase is unwrapped about the typical rate, so that a gap of several turns is bridged as long as the
    rate changes by less than half a turn over the gap.
    """
    time, phase = _paired(time_s, crank_rad)
    if len(time) < 3:
        return np.unwrap(phase)
    step = np.diff(time)
    turned = np.angle(np.exp(1j * np.diff(phase)))
    usual = step <= 1.5 * np.median(step)
    rate = float(np.sum(turned[usual]) / np.sum(step[usual]))
    return np.asarray(np.unwrap(phase - rate * time) + rate * time)


def turn_times(time_s: ArrayLike, crank_rad: ArrayLike) -> FloatArray:
    """Times (s) at which the crank has completed 0, 1, 2, ... whole turns since the first sample."""
    time, _ = _paired(time_s, crank_rad)
    phase = unwrap_crank(time, crank_rad)
    if phase[-1] < phase[0]:
        phase = -phase
    rising = np.maximum.accumulate(phase)  # encoder jitter must not run backwards
    turns = int((rising[-1] - rising[0]) / TURN + 1e-9)
    wanted = rising[0] + TURN * np.arange(turns + 1)
    # Of a flat stretch (standstill, or one count) the first sample is the time of arrival.
    first = np.concatenate(([True], np.diff(rising) > 0.0))
    return np.interp(wanted, rising[first], time[first])


def mean_flap(time_s: ArrayLike, crank_rad: ArrayLike) -> FlapRate:
    """Mean flap rate over a dwell: whole crank turns over the time they took.

    End to end through the unwrapped phase, not a line through it: a least-squares line weights the middle of
    the dwell and misses its mean once the speed wanders. `std` is for the rate the rig keeps on average at
    this drive: it contains the wander of the turn-by-turn rate with its serial correlation.

    time_s, crank_rad: shape (n,), s and rad (wrapped or not, either direction).
    Raises ValueError for arrays of unequal length, fewer than two samples or times that do not increase.
    """
    marks = turn_times(time_s, crank_rad)
    turns = len(marks) - 1
    if turns < 2:
        time, _ = _paired(time_s, crank_rad)
        phase = unwrap_crank(time, crank_rad)
        rate = abs(float(phase[-1] - phase[0])) / (TURN * float(time[-1] - time[0]))
        status = "standstill" if abs(phase[-1] - phase[0]) < 0.02 * TURN else "too_short"
        return FlapRate(0.0 if status == "standstill" else rate, float("nan"), turns, status)
    return _from_marks(marks)


def mean_flap_from_index(pulse_time_s: ArrayLike) -> FlapRate:
    """Mean flap rate from one index pulse per turn (times in s); as good as an encoder within 10 %."""
    marks = np.asarray(pulse_time_s, dtype=float)
    if marks.ndim != 1 or np.any(np.diff(marks) <= 0.0):
        raise ValueError("index pulse times must be one increasing series")
    if len(marks) < 3:
        return FlapRate(float("nan"), float("nan"), max(len(marks) - 1, 0), "too_short")
    return _from_marks(marks)


def crank_from_index(time_s: ArrayLike, pulse_time_s: ArrayLike) -> FloatArray:
    """Crank phase (rad) at each sample, straight lines between index pulses one turn apart."""
    time = np.asarray(time_s, dtype=float)
    pulses = np.asarray(pulse_time_s, dtype=float)
    if len(pulses) < 2 or np.any(np.diff(pulses) <= 0.0):
        raise ValueError("at least two increasing index pulse times are needed")
    phase = np.interp(time, pulses, TURN * np.arange(len(pulses)))
    before, after = time < pulses[0], time > pulses[-1]
    phase[before] = TURN * (time[before] - pulses[0]) / (pulses[1] - pulses[0])
    phase[after] = TURN * (len(pulses) - 1 + (time[after] - pulses[-1]) / (pulses[-1] - pulses[-2]))
    return phase


def turn_rate(time_s: ArrayLike, crank_rad: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Flap rate over the last whole turn, at every sample that has one: (time in s, rate in Hz).

    The window is one turn long by crank phase, so the speed ripple within a turn cancels.
    """
    time, _ = _paired(time_s, crank_rad)
    phase = unwrap_crank(time, crank_rad)
    if phase[-1] < phase[0]:
        phase = -phase
    rising = np.maximum.accumulate(phase)
    first = np.concatenate(([True], np.diff(rising) > 0.0))
    if rising[-1] - rising[0] < TURN or np.sum(first) < 2:
        return np.zeros(0), np.zeros(0)
    usable = (rising >= rising[0] + TURN) & first
    earlier = np.interp(rising[usable] - TURN, rising[first], time[first])
    return time[usable], 1.0 / (time[usable] - earlier)


def _from_marks(marks: FloatArray) -> FlapRate:
    turns = len(marks) - 1
    span = float(marks[-1] - marks[0])
    value = turns / span
    rates = 1.0 / np.diff(marks)
    return FlapRate(value, float(np.sqrt(mean_variance(rates))), turns)


def _paired(time_s: ArrayLike, values: ArrayLike) -> tuple[FloatArray, FloatArray]:
    time = np.asarray(time_s, dtype=float)
    data = np.asarray(values, dtype=float)
    if time.ndim != 1 or time.shape != data.shape:
        raise ValueError("time and values must be one-dimensional and of equal length")
    if len(time) < 2:
        raise ValueError("at least two samples are needed")
    if np.any(np.diff(time) <= 0.0):
        raise ValueError("times must increase")
    return time, data
