"""Flutter: the decay rate goes through zero at a flap rate where the body is still stiff."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from analysis.boundary.records import LevelPoint

LOWEST_LEVELS = 6
#: A decay rate that falls to less than this share of its median is on its way to zero.
FALLEN = 0.35
#: Decay rates scatter at least so much between levels (1/s).
DECAY_FLOOR_PER_S = 0.02


@dataclass(frozen=True)
class FlutterCrossing:
    """Flap rate (Hz) at which the decay rate is zero, with std and 95 % limits."""

    flap_hz: float
    std_hz: float
    low_hz: float
    high_hz: float


def flutter_crossing(levels: Sequence[LevelPoint]) -> FlutterCrossing | None:
    """Where the decay rate of the lowest levels extrapolates to zero; None where it does not head there.

    A line through the lowest levels, their decay rates weighted by uncertainty and scatter. Only taken where the
    lowest decay rate has fallen well below the median and the line crosses zero within 15 % of the lowest level.
    """
    from scipy.stats import t as t_distribution

    rows = sorted((level.flap_hz, *_decay(level)) for level in levels if level.taps)
    if len(rows) < 4:
        return None
    everything = np.array(rows)
    flap, decay, std = everything[:LOWEST_LEVELS].T
    if decay[0] > FALLEN * float(np.median(everything[:, 1])):
        return None
    weight = 1.0 / (std**2 + DECAY_FLOOR_PER_S**2)
    design = np.column_stack([np.ones_like(flap), flap - flap[0]])
    normal = np.linalg.inv(design.T @ (design * weight[:, None]))
    offset, slope = normal @ (design.T @ (weight * decay))
    if slope <= 0.0:
        return None
    left = decay - design @ np.array([offset, slope])
    normal = normal * max(1.0, float(weight @ left**2) / (len(flap) - 2))
    crossing = float(flap[0] - offset / slope)
    gradient = np.array([-1.0 / slope, offset / slope**2])
    std_hz = float(np.sqrt(gradient @ normal @ gradient))
    if abs(crossing / flap[0] - 1.0) > 0.15:
        return None
    half = float(t_distribution.ppf(0.975, len(flap) - 2)) * std_hz
    return FlutterCrossing(crossing, std_hz, crossing - half, crossing + half)


def _decay(level: LevelPoint) -> tuple[float, float]:
    """Mean decay rate of a level's taps and its standard uncertainty, scatter between taps included."""
    values = np.array([tap.decay_per_s for tap in level.taps])
    std = np.array([max(tap.decay_std_per_s, 1e-4) for tap in level.taps])
    weight = 1.0 / std**2
    mean = float(weight @ values / weight.sum())
    if len(values) < 2:
        return mean, float(std[0])
    birge = max(1.0, float(weight @ (values - mean) ** 2) / (len(values) - 1))
    return mean, float(np.sqrt(birge / weight.sum()))
