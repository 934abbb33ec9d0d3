"""The falling boundary: a joint fit of mean angle and slow stiffness of all levels that held the body.

The boundary fc and the fold's angle phic are searched; the rate K, the angle offset and its gain are linear.
Each channel's misfit is scaled by its own Birge ratio where that exceeds one; the interval is the profile
likelihood with an F quantile, and a model floor of 0.1 % in quadrature (terms of order (a/L)^2 that the
averaged form leaves out). A large tap softens the fitted stiffness: it is corrected, and left out beyond 5 %.

It misleads where constants mu, f0 of a floating carriage are unknown (up to 1 % high) and for a/L above 0.2.

References: R. T. Birge, Phys. Rev. 40 (1932) 207; profile likelihood as in W. Q. Meeker, L. A. Escobar, Am.
Statistician 49 (1995) 48 (values from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analysis.boundary.form import (
    FittedForm,
    RigConstants,
    bias_terms,
    shaking,
    stable_root,
    stiffness_shape,
)
from analysis.boundary.records import LevelPoint, TapPoint

Values = NDArray[np.float64]

FEWEST_LEVELS = 3
STIFFNESS_FLOOR = 0.008  # relative, per tap: what amplitude correction and drift leave
ANGLE_FLOOR_RAD = math.radians(0.02)
MOST_SOFTENING = 0.05
MODEL_FLOOR = 0.001
RHOS = (0.0, 0.5, 1.0)


@dataclass(frozen=True)
class LevelData:
    """Numbers of the held levels, one entry each."""

    flap_hz: Values
    stiffness: Values
    stiffness_var: Values
    angle: Values
    angle_var: Values


@dataclass(frozen=True)
class Profile:
    """Best misfit as a function of the boundary, and the best form."""

    fc: Values
    chi2: Values
    form: FittedForm
    chi2_stiffness: float
    chi2_angle: float


def level_data(levels: Sequence[LevelPoint], form: FittedForm | None) -> LevelData:
    """Level means; with a form, every tap's stiffness is corrected for its amplitude first."""
    rows = []
    for level in levels:
        softening = form.softening(level.flap_hz) if form is not None else 0.0
        if not math.isfinite(softening):
            softening = 0.0
        shifts = [softening * tap.amplitude_rad**2 for tap in level.taps]
        keep = [k for k, shift in enumerate(shifts) if abs(shift) <= MOST_SOFTENING]
        if not keep:
            keep = [min(range(len(shifts)), key=lambda k: abs(shifts[k]))]
        values, variances = [], []
        for k in keep:
            tap = level.taps[k]
            value = tap.stiffness_per_s2 / (1.0 + max(shifts[k], -0.5))
            values.append(value)
            variances.append(_tap_variance(level, tap, value))
        weight = 1.0 / np.array(variances)
        mean = float(weight @ np.array(values) / weight.sum())
        ambient = level.ambient_rms_rad if math.isfinite(level.ambient_rms_rad) else 0.0
        sigma = max(float(np.median([tap.decay_per_s for tap in level.taps])), 1e-3)
        slow = min(4.0 * sigma * ambient**2 / (max(mean, 1e-3) * max(level.quiet_s, 0.1)), ambient**2)
        own = level.angle_std_rad**2 if math.isfinite(level.angle_std_rad) else 0.0
        angle_var = max(slow, own) + ANGLE_FLOOR_RAD**2
        rows.append((level.flap_hz, mean, 1.0 / float(weight.sum()), level.angle_rad, angle_var))
    columns = np.array(rows).T
    return LevelData(*columns)


def _tap_variance(level: LevelPoint, tap: TapPoint, value: float) -> float:
    """Fit variance, what the random torque adds to it, and the relative floor."""
    sigma, ambient = max(tap.decay_per_s, 1e-3), level.ambient_rms_rad
    driven = 0.0
    if math.isfinite(ambient) and ambient > 0.0 and value > 0.0:
        density = 2.0 * sigma * value * ambient**2
        per_s2 = tap.kick_rad_per_s**2 / (2.0 * sigma * density) + tap.window_s / sigma
        driven = 4.0 * value / per_s2
    return tap.stiffness_std_per_s2**2 + driven + (STIFFNESS_FLOOR * value) ** 2


def profile(
    data: LevelData, constants: RigConstants, highest_hz: float, scales: tuple[float, float] = (1.0, 1.0)
) -> Profile | None:
    """Misfit over boundaries below `highest_hz`, refined around the minimum; None if no form fits at all."""
    mu = constants.coupling
    gain_std = 0.05 if constants.known else 0.15
    lowest = max(0.5 * float(data.flap_hz.min()), 1.05 * constants.resonance_hz)
    if lowest >= highest_hz:
        return None
    fc = np.linspace(lowest, highest_hz, 82)[:-1]
    # The body leans towards its fold the more the lower the drive: the sign of that is seen in the angles.
    lean = 1.0 if np.cov(data.angle, data.flap_hz)[0, 1] <= 0.0 else -1.0
    phic = lean * np.concatenate(([0.0], np.geomspace(0.02, 0.8, 22)))
    all_fc: list[Values] = []
    all_chi2: list[Values] = []
    best: tuple[float, FittedForm, float, float] | None = None
    for turn in range(6):
        chi2, forms = _grid(data, constants, fc, phic, gain_std, mu, scales)
        flat = np.nanmin(chi2, axis=(1, 2), initial=np.inf)
        all_fc.append(fc)
        all_chi2.append(flat)
        if not np.isfinite(flat).any():
            return None
        i, j, k = np.unravel_index(int(np.nanargmin(np.where(np.isfinite(chi2), chi2, np.inf))), chi2.shape)
        value = float(chi2[i, j, k])
        found = (value, *forms(int(i), int(j), int(k)))
        best = found if best is None or value <= best[0] else best
        # Narrow both searches around the best found so far.
        width = 0.22 * (fc[-1] - fc[0])
        centre = best[1].boundary_hz
        fc = np.linspace(max(centre - width, lowest), min(centre + width, highest_hz), 41)
        around = max(0.35 * abs(best[1].fold_rad), 0.01)
        wide = 1.0 if turn < 4 else 2.0
        phic = np.linspace(
            best[1].fold_rad - wide * around, best[1].fold_rad + wide * around, 25 if turn < 4 else 61
        )
    assert best is not None
    order = np.argsort(np.concatenate(all_fc))
    return Profile(np.concatenate(all_fc)[order], np.concatenate(all_chi2)[order], best[1], best[2], best[3])


def _grid(
    data: LevelData,
    constants: RigConstants,
    fc: Values,
    phic: Values,
    gain_std: float,
    mu: float,
    scales: tuple[float, float],
) -> tuple[Values, Callable[[int, int, int], tuple[FittedForm, float, float]]]:
    """chi2 over (fc, phic, rho) with the linear parameters at their best, and the form at an index."""
    f = data.flap_hz[:, None, None, None]
    fcs, phics = fc[None, :, None, None], phic[None, None, :, None]
    rho = np.array(RHOS)[None, None, None, :]
    r, b = bias_terms(phics, mu)
    x = shaking(f, fcs, constants.resonance_hz)
    q = (f / fcs) ** 2
    bias = b * (rho * q + 1.0 - rho)
    phi = stable_root(x, r, bias, mu)
    kshape = stiffness_shape(x, r, phi, mu)
    wk = (1.0 / (data.stiffness_var * scales[0]))[:, None, None, None]
    wa = (1.0 / (data.angle_var * scales[1]))[:, None, None, None]
    kappa, angle = data.stiffness[:, None, None, None], data.angle[:, None, None, None]
    with np.errstate(invalid="ignore", divide="ignore"):
        rate = (wk * kappa * kshape).sum(0) / (wk * kshape**2).sum(0)
        chi_k = (wk * (kappa - rate * kshape) ** 2).sum(0)
        # angle = offset + gain phi, gain ~ N(1, gain_std)
        s0, s1, s2 = wa.sum(0), (wa * phi).sum(0), (wa * phi**2).sum(0)
        y0, y1 = (wa * angle).sum(0), (wa * angle * phi).sum(0)
        prior = 1.0 / gain_std**2
        det = s0 * (s2 + prior) - s1**2
        offset = ((s2 + prior) * y0 - s1 * (y1 + prior)) / det
        gain = (s0 * (y1 + prior) - s1 * y0) / det
        chi_a = (wa * (angle - offset - gain * phi) ** 2).sum(0)
        chi2 = chi_k + chi_a + prior * (gain - 1.0) ** 2 + ((rho[0] - 0.7) / 0.5) ** 2
    chi2 = np.where(np.isfinite(chi2) & (rate > 0.0), chi2, np.inf)

    def form(i: int, j: int, k: int) -> tuple[FittedForm, float, float]:
        fitted = FittedForm(
            float(fc[i]),
            float(phic[j]),
            float(rate[i, j, k]),
            float(offset[i, j, k]),
            float(gain[i, j, k]),
            RHOS[k],
            constants,
        )
        return fitted, float(chi_k[i, j, k]), float(chi_a[i, j, k])

    return chi2, form


@dataclass(frozen=True)
class FoldFit:
    """Boundary in Hz with std and 95 % limits, its form, and the Birge ratios of stiffness and angle."""

    flap_hz: float
    std_hz: float
    low_hz: float
    high_hz: float
    form: FittedForm
    birge: tuple[float, float]
    open_below: bool


def fit_fold(levels: Sequence[LevelPoint], constants: RigConstants) -> FoldFit | None:
    """Fit the boundary to held levels with usable taps (three or more); None if nothing fits."""
    from scipy.stats import f as f_distribution

    if len(levels) < FEWEST_LEVELS:
        return None
    highest = min(level.flap_hz for level in levels)
    data = level_data(levels, None)
    found = profile(data, constants, highest)
    for _ in range(2):
        if found is None:
            return None
        data = level_data(levels, found.form)
        found = profile(data, constants, highest)
    if found is None:
        return None
    n = len(levels)
    freedom = max(n - 2, 1)
    birge = (max(found.chi2_stiffness / freedom, 1.0), max(found.chi2_angle / freedom, 1.0))
    scaled = profile(data, constants, highest, birge)
    if scaled is None:
        return None
    least = float(scaled.chi2.min())
    allowed = float(f_distribution.ppf(0.95, 1, max(2 * n - 4, 1)))
    inside = scaled.fc[scaled.chi2 <= least + allowed]
    best = scaled.form.boundary_hz
    low, high = min(float(inside.min()), best), max(float(inside.max()), best)
    open_below = low <= 1.01 * float(scaled.fc.min())
    floor = 1.959964 * MODEL_FLOOR * best
    down, up = math.hypot(best - low, floor), math.hypot(high - best, floor)
    return FoldFit(
        best, (down + up) / (2.0 * 1.959964), best - down, best + up, scaled.form, birge, open_below
    )
