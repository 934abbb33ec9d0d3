"""Decay, frequency and stiffness of one level from all its taps together, at vanishing amplitude."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analysis.decay.driven import fit_driven
from analysis.decay.fit import fit_decay
from analysis.decay.record import TapRecord, checked, quiet_record
from analysis.decay.result import NAN, NORMAL_95, DecayFit, SlowMode, mode_frequency, stiffness_std

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class LevelDecay(SlowMode):
    """Slow mode of a level; at vanishing amplitude where `extrapolated`.

    taps: records used of those given; softening_per_rad2: relative change of stiffness with amplitude squared.
    status: "ok", "overdamped", "not_identifiable", "no_signal" (no usable tap).
    """

    ambient_rms_rad: float = NAN
    taps: int = 0
    extrapolated: bool = False
    softening_per_rad2: float = NAN
    fits: tuple[DecayFit, ...] = ()


def fit_level(
    records: Sequence[TapRecord],
    quiet: TapRecord | Sequence[ArrayLike | None] | None = None,
) -> LevelDecay:
    """Slow mode of a level from all its taps and the quiet record before them, one joint likelihood.

    records: one `TapRecord` per tap (s, rad, rad), each starting 25 to 50 ms after its tap. quiet: as for
    `fit_decay`. Raises ValueError for malformed arrays only; a level without a usable tap gets a status.
    """
    taps = [checked(one.time_s, one.angle_rad, one.crank_rad) for one in records]
    fits = [fit_decay(one.time_s, one.angle_rad, one.crank_rad, thorough=False) for one in taps]
    before = quiet_record(quiet)
    good = [
        k
        for k, fit in enumerate(fits)
        if fit.status in ("ok", "overdamped") and np.isfinite(fit.decay_std_per_s)
    ]
    if not good:
        return LevelDecay("no_signal", "no tap left a swing that could be fitted", fits=tuple(fits))
    weights = np.array([1.0 / fits[k].decay_std_per_s ** 2 for k in good])
    sigma = float(np.average([fits[k].decay_per_s for k in good], weights=weights))
    q = float(np.average([fits[k].omega_squared for k in good], weights=weights))
    covariance = np.mean([fits[k].covariance for k in good], axis=0)
    found = fit_driven([taps[k] for k in good], before, sigma, q, covariance)
    sigma, q, covariance = found.sigma, found.q, found.covariance
    decay_std, q_std = (float(np.sqrt(covariance[k, k])) for k in (0, 1))
    hertz, hertz_std, hertz_low, hertz_high = mode_frequency(q, q_std)
    kappa, kappa_std = q + sigma**2, stiffness_std(sigma, covariance)
    return LevelDecay(
        "ok" if q > 0.0 else "overdamped",
        "",
        sigma,
        decay_std,
        sigma - NORMAL_95 * decay_std,
        sigma + NORMAL_95 * decay_std,
        hertz,
        hertz_std,
        hertz_low,
        hertz_high,
        kappa,
        kappa_std,
        kappa - NORMAL_95 * kappa_std,
        kappa + NORMAL_95 * kappa_std,
        found.ambient_rms,
        len(good),
        fits=tuple(fits),
    )
