"""Does slow stiffness grow with the square of the flap rate, and as fast as vibration alone would make it?

    kappa = slope f^2 + intercept,      theory: slope = (2 pi a / L)^2 / 2,  intercept about -g / L

Levels near the boundary bend away from the line, since the mean angle grows there, and are left out.
Aerodynamic stiffness grows with f^2 as well: a slope that agrees is not yet proof of vibration. That takes the
same body at the same flap rates with its carriage clamped.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from analysis.counting import counted

FEWEST_LEVELS = 4
#: Levels closer to the boundary than this are left out.
ABOVE_BOUNDARY = 1.15
MODEL_FLOOR = 0.01  # relative: the averaged slope leaves out terms of order (a/L)^2 and the mean angle
NORMAL_95 = 1.959964


@dataclass(frozen=True)
class StiffnessPoint:
    """Slow stiffness of a level with its standard uncertainty."""

    flap_hz: float
    stiffness_per_s2: float
    stiffness_std_per_s2: float


@dataclass(frozen=True)
class VibrationVerdict:
    """verdict "supported", "not_supported" or "not_testable"; slope and theory slope are pure numbers.

    lack_of_fit_p: probability of so much misfit to a straight line by chance.
    """

    verdict: str
    reason: str
    slope: float = math.nan
    slope_std: float = math.nan
    intercept_per_s2: float = math.nan
    theory_slope: float = math.nan
    theory_slope_std: float = math.nan
    lack_of_fit_p: float = math.nan
    levels: int = 0


def judge(
    points: Sequence[StiffnessPoint],
    *,
    boundary_hz: float | None,
    shake_amplitude_m: float | None,
    shake_std_m: float = 0.0,
    length_m: float | None = None,
    length_std_m: float = 0.0,
    control: Sequence[StiffnessPoint] = (),
) -> VibrationVerdict:
    """Line through stiffness against f^2, its lack of fit, and its slope against theory.

    control: stiffness of the same body with the carriage clamped, at the same flap rates; it is subtracted.
    Weighted least squares; lack of fit by chi-square; slopes compared at 95 % with a relative model floor.
    """
    from scipy.stats import chi2

    limit = ABOVE_BOUNDARY * boundary_hz if boundary_hz else 0.0
    used = [point for point in points if point.flap_hz >= limit and math.isfinite(point.stiffness_std_per_s2)]
    if len(used) < FEWEST_LEVELS:
        reason = (
            f"{counted(len(used), 'held level')} clear of the boundary, {FEWEST_LEVELS} are needed for a line"
        )
        return VibrationVerdict("not_testable", reason, levels=len(used))
    square = np.array([point.flap_hz**2 for point in used])
    kappa = np.array([point.stiffness_per_s2 for point in used])
    if control:
        order = sorted(control, key=lambda point: point.flap_hz)
        kappa = kappa - np.interp(
            np.sqrt(square), [p.flap_hz for p in order], [p.stiffness_per_s2 for p in order]
        )
    var = np.array([point.stiffness_std_per_s2**2 for point in used]) + (MODEL_FLOOR * kappa) ** 2
    weight = 1.0 / var
    centre = float(weight @ square / weight.sum())
    spread = float(weight @ (square - centre) ** 2)
    slope = float(weight @ ((square - centre) * kappa)) / spread
    mean = float(weight @ kappa / weight.sum())
    misfit = float(weight @ (kappa - mean - slope * (square - centre)) ** 2)
    p_value = float(chi2.sf(misfit, len(used) - 2))
    slope_std = math.sqrt(max(1.0, misfit / (len(used) - 2)) / spread)
    intercept = mean - slope * centre
    line = f"slope {slope:.4f} +- {NORMAL_95 * slope_std:.4f} over {len(used)} levels"
    found = VibrationVerdict(
        "not_testable",
        "",
        slope,
        slope_std,
        intercept,
        lack_of_fit_p=p_value,
        levels=len(used),
    )
    if shake_amplitude_m is None or length_m is None:
        missing = "the shake amplitude" if shake_amplitude_m is None else "the body's I / (m r)"
        return _with(found, "not_testable", f"{line}, but {missing} is not known")
    theory = (2.0 * math.pi * shake_amplitude_m / length_m) ** 2 / 2.0
    relative = math.hypot(2.0 * shake_std_m / shake_amplitude_m, 2.0 * length_std_m / length_m)
    theory_std = theory * math.hypot(relative, 2.0 * MODEL_FLOOR)
    found = VibrationVerdict(**{**vars(found), "theory_slope": theory, "theory_slope_std": theory_std})
    away = abs(slope - theory) / math.hypot(slope_std, theory_std)
    compared = f"{line}; theory with the measured shaking {theory:.4f} +- {NORMAL_95 * theory_std:.4f}"
    if p_value < 0.01:
        return _with(
            found, "not_supported", f"{compared}; the levels do not lie on a line (p = {p_value:.1e})"
        )
    if away > NORMAL_95 * 1.5:
        return _with(found, "not_supported", f"{compared}: {away:.1f} standard uncertainties apart")
    if not control:
        reason = (
            f"{compared}: they agree, but aerodynamic stiffness grows with f^2 too, and without the control at the "
            "same flap rates (carriage clamped) the two cannot be told apart"
        )
        return _with(found, "not_testable", reason)
    return _with(found, "supported", f"{compared}, after subtracting the clamped control")


def _with(found: VibrationVerdict, verdict: str, reason: str) -> VibrationVerdict:
    return VibrationVerdict(**{**vars(found), "verdict": verdict, "reason": reason})
