"""Cycle-mean load: the small mean force under a shaking force hundreds of times larger."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from analysis.flap import TURN, unwrap_crank
from analysis.position import mean_over_turns


@dataclass(frozen=True)
class CycleMeanLoad:
    """Mean force in N over whole turns, less the zero; `resolved` tells if it stands out, `reason` why (not).

    peak_n: largest distance of a sample from the mean.
    """

    value: float
    std: float
    resolved: bool
    reason: str
    turns: int
    peak_n: float


def cycle_mean_load(
    time_s: ArrayLike,
    load_n: ArrayLike,
    crank_rad: ArrayLike,
    *,
    range_n: tuple[float, float] | None = None,
    zero_n: float = 0.0,
    zero_std_n: float = 0.0,
    crank_counts: int = 2048,
) -> CycleMeanLoad:
    """Mean load over whole crank turns, and whether it can be told from zero.

    range_n: lowest and highest force the cell and its converter can show; a sample at either end is clipped,
    and the mean of a clipped signal is shifted by an unknown amount. zero_n, zero_std_n: reading without load
    and its standard uncertainty (drift since it was taken included). The std adds in squares the turn-to-turn
    scatter with its correlation, the zero, and the share of the shaking left by crank edges one count off.
    "Resolved" means larger than twice its standard uncertainty.
    Raises ValueError for arrays of unequal length.
    """
    time, values = np.asarray(time_s, dtype=float), np.asarray(load_n, dtype=float)
    mean = mean_over_turns(time, values, crank_rad)
    value = mean.value - zero_n
    peak = float(np.max(np.abs(values - mean.value)))
    if range_n is not None:
        low, high = range_n
        rim = 1e-3 * (high - low)
        clipped = int(np.sum((values <= low + rim) | (values >= high - rim)))
        if clipped:
            reason = f"not resolvable: the load cell clips ({clipped} samples at the end of its range)"
            return CycleMeanLoad(value, float("nan"), False, reason, mean.turns, peak)
    if mean.status != "ok":
        reason = f"not resolvable: {mean.turns} whole crank turns, two are needed"
        return CycleMeanLoad(value, float("nan"), False, reason, mean.turns, peak)
    turned = abs(float(np.diff(unwrap_crank(time, crank_rad)[[0, -1]])[0]))
    edge = peak * (TURN / crank_counts) / np.sqrt(6.0) / turned
    std = float(np.sqrt(mean.std**2 + zero_std_n**2 + edge**2))
    if abs(value) > 2.0 * std:
        reason = f"{abs(value) / std:.1f} standard uncertainties from zero"
        return CycleMeanLoad(value, std, True, reason, mean.turns, peak)
    causes = {"turn-to-turn scatter": mean.std, "zero drift": zero_std_n, "crank resolution": float(edge)}
    cause = max(causes, key=lambda name: causes[name])
    reason = f"not resolvable: {cause} ({causes[cause]:.2g} N) against a mean of {value:.2g} N"
    return CycleMeanLoad(value, std, False, reason, mean.turns, peak)
