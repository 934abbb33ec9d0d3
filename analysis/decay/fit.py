"""Decay rate of the slow mode from one record of body angle."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analysis.decay.checks import doubts
from analysis.decay.driven import DrivenFit, fit_driven
from analysis.decay.model import mode_columns
from analysis.decay.projection import ModeFit, refine, starts
from analysis.decay.record import (
    TWO_PI,
    TapRecord,
    blocks_of,
    checked,
    nuisance_rows,
    orthonormal,
    quiet_record,
)
from analysis.decay.result import NORMAL_95, DecayFit, mode_frequency, stiffness_std
from analysis.decay.uncertainty import least_squares_covariance, robust_covariance
from analysis.sinefit import crank_from_signal

FloatArray = NDArray[np.float64]
TOP_HZ = 12.0
BELOW_FLAP = 0.75
SHORTEST_S = 0.2
FEWEST = 24
SEEN = 40.0  # explained sum of squares over noise variance; white noise alone reaches 25 once in 1e4 records


def fit_decay(
    time_s: ArrayLike,
    angle_rad: ArrayLike,
    crank_rad: ArrayLike | None = None,
    *,
    quiet: TapRecord | Sequence[ArrayLike | None] | None = None,
    stops_rad: tuple[float, float] | None = None,
    thorough: bool = True,
) -> DecayFit:
    """Decay rate (1/s), frequency and stiffness of the free swing in a record of body angle.

        angle = exp(-sigma t) [c1 C(q, t) + c2 S(q, t)] + offset + drift t + sum a_h cos(h psi) + b_h sin(h psi)

    with q = omega_d^2 of either sign, psi the crank phase, h = 1, 2. The linear terms are projected out and
    only (sigma, q) are searched, from a grid over decay and frequency. The 95 % interval is the widest of
    ordinary least squares, a robust one for correlated noise, and, where `quiet` is given, a state-space
    likelihood of both records (mode driven by random torque plus a slow disturbance), which then also gives
    the point estimate. Start the record 25 to 50 ms after the tap.

    One sigma for the whole record: where decay or frequency change with amplitude it returns a value
    belonging to neither end (remark "amplitude_dependent"). One real pole is not a second-order mode.
    Without crank phase the flap line is followed in the angle itself, which is much worse than an encoder.

    Parameters
    ----------
    time_s, angle_rad, crank_rad : shape (n,), s and rad; crank phase wrapped or not, None if there is none.
    quiet : (time_s, angle_rad, crank_rad) of the undisturbed record before the tap, 5 s or more, about 20 s best.
    stops_rad : (low, high) end stops; a record that touches one is refused with status "contact".
    thorough : False leaves out the checks for a second mode, amplitude dependence and friction.

    Raises ValueError for arrays of unequal length, times that do not increase, values not finite. Never for noise.

    References: Golub & Pereyra 1973, doi 10.1137/0710036 (variable projection); Newey & West 1987.
    """
    record = checked(time_s, angle_rad, crank_rad)
    before = quiet_record(quiet)
    count = len(record.time_s)
    if count < FEWEST or record.time_s[-1] < SHORTEST_S:
        return DecayFit("too_short", f"{count} samples are too few for a decay rate", n_samples=count)
    if stops_rad is not None:
        from analysis.state import contact

        touched = contact(record.angle_rad, stops_rad)
        if touched.any():
            side = "lower" if touched.low.any() else "upper"
            reason = f"{touched.samples} of {count} samples lie on the {side} end stop"
            return DecayFit("contact", reason, n_samples=count)
    if record.crank_rad is None:
        record = replace(record, crank_rad=crank_from_signal(record.time_s, record.angle_rad))
    basis = orthonormal(nuisance_rows(record))
    free = len(basis) + 4
    mode = least_squares_mode(record, basis)
    variance = mode.rss / max(count - free, 1)
    data = record.angle_rad - (basis @ record.angle_rad) @ basis
    explained = float(data @ data) - mode.rss
    if not explained > SEEN * variance:
        rms = float(np.sqrt(variance))
        return DecayFit("no_signal", "no free swing above the noise", n_samples=count, residual_rms_rad=rms)
    try:
        covariance = least_squares_covariance(mode.slopes, mode.residual, free)
        robust = robust_covariance(mode.slopes, mode.residual, free)
    except np.linalg.LinAlgError:
        return DecayFit("not_identifiable", "the record does not pin down two poles", n_samples=count)
    interval = "white"
    if robust[0, 0] > covariance[0, 0]:
        covariance, interval = robust, "robust"
    sigma, q = mode.sigma, mode.q
    driven: DrivenFit | None = None
    if before is not None and len(before.time_s) >= FEWEST:
        if before.crank_rad is None:
            before = replace(before, crank_rad=crank_from_signal(before.time_s, before.angle_rad))
        driven = fit_driven([record], before, sigma, q, covariance)
        if driven.ok:
            sigma, q = driven.sigma, driven.q
            if driven.covariance[0, 0] > covariance[0, 0]:
                covariance, interval = driven.covariance, "driven"
    return _assemble(record, mode, sigma, q, covariance, interval, driven, thorough)


def least_squares_mode(record: TapRecord, basis: FloatArray) -> ModeFit:
    """Best mode of one record in the least-squares sense: grid, block means of 60 Hz, then every sample."""
    time = record.time_s
    data = record.angle_rad - (basis @ record.angle_rad) @ basis
    top_hz = TOP_HZ
    if record.crank_rad is not None:
        flap_hz = abs(float(record.crank_rad[-1] - record.crank_rad[0])) / TWO_PI / time[-1]
        if flap_hz > 2.0:
            top_hz = min(top_hz, BELOW_FLAP * flap_hz)
    coarse, fine = blocks_of(time, 30.0), blocks_of(time, 60.0)
    top_hz = min(top_hz, 0.4 * len(time) / time[-1])
    pairs = starts(coarse.time_s, coarse.mean(data), orthonormal(coarse.mean(basis[:2])), top_hz)
    slow_basis = orthonormal(fine.mean(basis))
    slow = fine.mean(record.angle_rad)
    slow = slow - (slow_basis @ slow) @ slow_basis
    tried = [refine(fine.time_s, slow, slow_basis, sigma, q, top_hz) for sigma, q in pairs]
    best = min(tried, key=lambda mode: mode.rss)
    return refine(time, data, basis, best.sigma, best.q, top_hz, iterations=12)


def _assemble(
    record: TapRecord,
    mode: ModeFit,
    sigma: float,
    q: float,
    covariance: FloatArray,
    interval: str,
    driven: DrivenFit | None,
    thorough: bool,
) -> DecayFit:
    time = record.time_s
    rows = nuisance_rows(record)
    columns = np.empty((6, len(time)))
    mode_columns(time, sigma, q, columns)
    linear = np.concatenate((columns[:2], rows))
    size = np.maximum(np.linalg.norm(linear, axis=1), 1e-300)
    solution = np.linalg.lstsq((linear / size[:, None]).T, record.angle_rad, rcond=1e-12)[0] / size
    c1, c2 = float(solution[0]), float(solution[1])
    model = solution @ linear
    residual = record.angle_rad - model
    variance = float(residual @ residual) / max(len(time) - len(linear) - 2, 1)
    # Angular rate at the start, with everything else free.
    slopes = np.array((-(c1 * columns[2] + c2 * columns[3]), c1 * columns[4] + c2 * columns[5]))
    everything = np.concatenate((linear, slopes))
    size = np.maximum(np.linalg.norm(everything, axis=1), 1e-300)
    unit = everything / size[:, None]
    spread = np.linalg.pinv(unit @ unit.T, hermitian=True) * variance
    direction = np.zeros(len(everything))
    direction[0], direction[1], direction[-2] = -sigma, 1.0, -c1
    direction /= size
    v0_std = float(np.sqrt(max(float(direction @ spread @ direction), 0.0)))
    omega = float(np.sqrt(max(q, 1e-12)))
    amplitude = float(np.hypot(c1, c2 / omega)) if q > 0.0 else abs(c1)
    decay_std = float(np.sqrt(covariance[0, 0]))
    q_std = float(np.sqrt(covariance[1, 1]))
    hertz, hertz_std, hertz_low, hertz_high = mode_frequency(q, q_std)
    kappa, kappa_std = q + sigma**2, stiffness_std(sigma, covariance)
    status, reason = _identified(sigma, q, decay_std, q_std, float(time[-1]))
    ambient = driven.ambient_rms if driven is not None and driven.ok else float("nan")
    if status == "ok" and amplitude < 1.2 * ambient:
        status, reason = "no_signal", "the swing is no larger than the ambient motion of the mode"
    found = DecayFit(
        status=status,
        reason=reason,
        decay_per_s=sigma,
        decay_std_per_s=decay_std,
        decay_low_per_s=sigma - NORMAL_95 * decay_std,
        decay_high_per_s=sigma + NORMAL_95 * decay_std,
        mode_hz=hertz,
        mode_std_hz=hertz_std,
        mode_low_hz=hertz_low,
        mode_high_hz=hertz_high,
        stiffness_per_s2=kappa,
        stiffness_std_per_s2=kappa_std,
        stiffness_low_per_s2=kappa - NORMAL_95 * kappa_std,
        stiffness_high_per_s2=kappa + NORMAL_95 * kappa_std,
        amplitude_rad=amplitude,
        phase_rad=float(np.arctan2(-c2 / omega, c1)) if q > 0.0 else 0.0,
        v0_rad_per_s=c2 - sigma * c1,
        v0_std_rad_per_s=v0_std,
        offset_rad=float(solution[2] - solution[3] * time.mean()),
        drift_rad_per_s=float(solution[3]),
        ambient_rms_rad=ambient,
        residual_rms_rad=float(np.sqrt(variance)),
        n_samples=len(time),
        interval=interval,
        covariance=covariance,
        time_s=time,
        model_rad=model,
        residual_rad=residual,
    )
    if thorough and status == "ok":
        found = replace(found, remarks=doubts(record, mode))
    return found


def _identified(sigma: float, q: float, decay_std: float, q_std: float, span: float) -> tuple[str, str]:
    """Status and reason from how well the two poles stand apart."""
    if q < -NORMAL_95 * q_std:
        split = float(np.sqrt(-q))
        # The poles are sigma -+ split; both are seen only if neither's uncertainty reaches the other.
        if decay_std < 0.3 * split and q_std < 0.6 * abs(q):
            return "overdamped", f"two real poles, {sigma - split:.2f} and {sigma + split:.2f} 1/s"
        return "not_identifiable", "one real pole alone is not a second-order mode"
    if q * span**2 < (0.5 * TWO_PI) ** 2 and decay_std > max(0.5 * abs(sigma), 0.5 / span):
        return "not_identifiable", "less than half a swing: decay cannot be told from drift"
    return "ok", ""
