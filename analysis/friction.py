"""Is the body held by dry friction? Straight-line against exponential envelope over the taps of a level."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from analysis.decay.result import DecayFit


@dataclass(frozen=True)
class FrictionVerdict:
    """verdict: "supported" (exponential, not friction), "not_supported" or "not_testable", and why.

    slope_per_s_per_rad: change of decay rate with amplitude, and its standard uncertainty; dry friction
    makes it strongly negative (small swings die faster).
    """

    verdict: str
    reason: str
    slope_per_s_per_rad: float = float("nan")
    slope_std: float = float("nan")


def judge(fits: Sequence[DecayFit], *, displaced: int = 0) -> FrictionVerdict:
    """Whether taps decay exponentially: fits of one level, or of levels at like drives; displaced: taps after
    which the body stayed where it was put.

    Three signs of dry friction: the body stays displaced, envelopes are straight lines, and small swings decay
    faster than large ones. One tap can show a straight line; that taps of different size agree needs sizes
    that differ by a quarter or more.
    """
    good = [fit for fit in fits if fit.status == "ok"]
    if displaced > 0:
        return FrictionVerdict("not_supported", f"after {displaced} taps the body stayed where it was put")
    if not good:
        return FrictionVerdict("not_testable", "no tap gave a usable decay")
    straight = sum("friction_like" in fit.remarks for fit in good)
    if straight > 0.3 * len(good):
        return FrictionVerdict("not_supported", f"{straight} of {len(good)} envelopes are straight lines")
    amplitude = np.array([fit.amplitude_rad for fit in good])
    decay = np.array([fit.decay_per_s for fit in good])
    std = np.array([fit.decay_std_per_s for fit in good])
    exponential = f"{len(good) - straight} of {len(good)} envelopes are exponential"
    if len(good) < 3 or amplitude.max() < 1.25 * amplitude.min():
        return FrictionVerdict(
            "not_testable", exponential + ", but the taps are too few or too alike in size"
        )
    weight = 1.0 / std**2
    centre = float(weight @ amplitude / weight.sum())
    spread = float(weight @ (amplitude - centre) ** 2)
    slope = float(weight @ ((amplitude - centre) * decay)) / spread
    left = decay - float(weight @ decay / weight.sum()) - slope * (amplitude - centre)
    birge = max(1.0, float(weight @ left**2) / (len(good) - 2))
    slope_std = float(np.sqrt(birge / spread))
    drop = slope * float(amplitude.max() - amplitude.min())
    mean = float(weight @ decay / weight.sum())
    if slope < -3.0 * slope_std and -drop > 0.2 * abs(mean):
        reason = f"small swings decay faster: {-drop:.2f} 1/s between the largest and the smallest tap"
        return FrictionVerdict("not_supported", reason, slope, slope_std)
    return FrictionVerdict("supported", exponential + ", and taps of several sizes agree", slope, slope_std)
