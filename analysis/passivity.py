"""Was the body held without feedback? The drive was locked, and its measured voltage did not follow the body.

The voltage at the motor's terminals is regressed on the slow body angle and its rate over the swings after taps:

    V = V0 + drift t + g theta + g' theta' + noise

g is the feedback gain somebody could have hidden. Its detection limit (5 % false alarms, 5 % misses) is 3.3
standard uncertainties, as in ISO 11843-1 (value from memory).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from analysis.counting import counted

DETECTION = 3.3
BLOCK_S = 0.05


@dataclass(frozen=True)
class PassivityVerdict:
    """verdict "supported", "not_supported" or "not_testable"; gain in V/rad with its standard uncertainty.

    smallest_gain_seen_v_per_rad: the detection limit.
    """

    verdict: str
    reason: str
    gain_v_per_rad: float = math.nan
    gain_std_v_per_rad: float = math.nan
    smallest_gain_seen_v_per_rad: float = math.nan


@dataclass(frozen=True)
class Gain:
    """Regression of one record: V/rad and its standard uncertainty."""

    value: float
    std: float


def voltage_gain(time_s: ArrayLike, angle_rad: ArrayLike, voltage_v: ArrayLike) -> Gain | None:
    """How much the terminal voltage follows the slow body angle in one record; None if it is too short.

    Both are averaged over 50 ms first: the flapping itself may ripple both. Std from the residual of the
    averages, widened for their correlation from one block to the next.
    Raises ValueError for arrays of unequal length.
    """
    time, angle, volts = (np.asarray(values, dtype=float) for values in (time_s, angle_rad, voltage_v))
    if not time.shape == angle.shape == volts.shape:
        raise ValueError("time, angle and voltage must be of equal length")
    blocks = int((time[-1] - time[0]) / BLOCK_S) if len(time) else 0
    if blocks < 20:
        return None
    edges = np.linspace(0, len(time), blocks + 1).astype(int)[:-1]
    count = np.diff(np.append(edges, len(time)))
    t, theta, v = (np.add.reduceat(values, edges) / count for values in (time, angle, volts))
    rate = np.gradient(theta, t)
    scale = float(theta.std())
    if scale == 0.0:
        return None
    design = np.column_stack([np.ones_like(t), t - t.mean(), theta - theta.mean(), rate])
    unit = np.linalg.norm(design, axis=0)
    unit[unit == 0.0] = 1.0
    solution, *_ = np.linalg.lstsq(design / unit, v, rcond=None)
    left = v - design / unit @ solution
    spread = np.linalg.pinv((design / unit).T @ (design / unit))
    variance = float(left @ left) / max(blocks - 4, 1)
    serial = float(left[1:] @ left[:-1]) / max(float(left @ left), 1e-300)
    widen = (1.0 + max(serial, 0.0)) / (1.0 - min(max(serial, 0.0), 0.95))
    std = math.sqrt(variance * widen * float(spread[2, 2])) / float(unit[2])
    return Gain(float(solution[2] / unit[2]), std)


def judge(writes: Sequence[int], gains: Sequence[Gain], locked: bool) -> PassivityVerdict:
    """Verdict from the write counts of all locked intervals and the gains of all records."""
    if not locked or not writes:
        return PassivityVerdict("not_testable", "the drive was not locked during the analysed intervals")
    total = sum(writes)
    intervals = counted(len(writes), "locked interval")
    if total:
        reason = f"the drive register was written {counted(total, 'time')} during {intervals}"
        return PassivityVerdict("not_supported", reason)
    known = [gain for gain in gains if gain.std > 0.0 and math.isfinite(gain.std)]
    if not known:
        reason = f"no write in {intervals}, but the motor voltage was not measured over a swing"
        return PassivityVerdict("not_testable", reason)
    weight = np.array([1.0 / gain.std**2 for gain in known])
    value = float(weight @ np.array([gain.value for gain in known]) / weight.sum())
    misfit = float(weight @ (np.array([gain.value for gain in known]) - value) ** 2)
    birge = max(1.0, misfit / max(len(known) - 1, 1))
    std = math.sqrt(birge / float(weight.sum()))
    limit = DETECTION * std
    numbers = (value, std, limit)
    if abs(value) > limit:
        reason = f"the motor voltage follows the body: {value:.2g} +- {1.96 * std:.2g} V/rad"
        return PassivityVerdict("not_supported", reason, *numbers)
    reason = (
        f"no write to the drive in {intervals}; the measured motor voltage does not follow the "
        f"body, a gain of {limit:.2g} V/rad or more would have been seen"
    )
    return PassivityVerdict("supported", reason, *numbers)
