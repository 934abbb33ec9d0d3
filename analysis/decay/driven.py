"""Decay of a mode that random torque keeps pushing: likelihood of quiet and tapped records together."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analysis.decay.model import mode_columns
from analysis.decay.record import TapRecord, blocks_of, nuisance_rows, orthonormal
from analysis.decay.statespace import whiten

FloatArray = NDArray[np.float64]
RATE_HZ = 60.0
# Four Gauss-Legendre nodes and weights on [0, 1]: exact to 1e-9 for a step of 1/60 s.
NODES = (np.polynomial.legendre.leggauss(4)[0] + 1.0) / 2.0
WEIGHTS = np.polynomial.legendre.leggauss(4)[1] / 2.0


@dataclass(frozen=True)
class Series:
    """Block means of one record with the crank harmonics taken out, shape (n,); `steps` blocks apart."""

    time_s: FloatArray
    data: FloatArray
    steps: NDArray[np.int64]
    step_s: float
    tapped: bool


@dataclass(frozen=True)
class DrivenFit:
    """Most likely sigma (1/s), q (1/s^2), their (2, 2) covariance, and the ambient rms of the mode (rad)."""

    sigma: float
    q: float
    covariance: FloatArray
    ambient_rms: float
    disturbance_rms: float
    noise_rms: float  # of one block
    ok: bool


def series_of(record: TapRecord, sigma: float | None = None, q: float | None = None) -> Series:
    """Harmonic-cleaned block means; a tapped record needs the mode so that it is not taken for ripple."""
    time = record.time_s
    rows = nuisance_rows(record)
    tapped = sigma is not None and q is not None
    if sigma is not None and q is not None:
        columns = np.empty((6, len(time)))
        mode_columns(time, sigma, q, columns)
        rows = np.concatenate((rows, columns[:4]))
    angle = record.angle_rad
    if record.crank_rad is not None:
        size = np.linalg.norm(rows, axis=1)
        solution = np.linalg.lstsq((rows / size[:, None]).T, angle, rcond=1e-12)[0] / size
        angle = angle - solution[2:6] @ rows[2:6]
    blocks = blocks_of(time, RATE_HZ)
    step = float(np.median(np.diff(blocks.time_s)))
    steps = np.concatenate(([1], np.maximum(np.round(np.diff(blocks.time_s) / step), 1))).astype(np.int64)
    return Series(blocks.time_s, blocks.mean(angle), steps, step, tapped)


def noise_terms(
    sigma: float, q: float, torque: float, spread: float, memory_s: float, step: float, tapped: bool
) -> FloatArray:
    """The twelve numbers `whiten` needs; torque is the variance rate of the angular rate, spread the OU variance."""
    if step * abs(sigma) > 30.0 or abs(q) * step**2 > 900.0:
        return np.full(12, np.nan)
    times = np.append(step * NODES, step)
    columns = np.empty((6, 5))
    mode_columns(times, sigma, q, columns)
    c, s = columns[0], columns[1]
    # Impulse response of (theta, omega) to a unit kick.
    rate = c - sigma * s
    weight = WEIGHTS * step * torque
    stiffness = q + sigma**2
    # Without a stationary state the first sample of a quiet record is nearly free.
    settled, stiff = max(sigma, 0.03), max(stiffness, 0.3)
    theta = 0.0 if tapped else torque / (4.0 * settled * stiff)
    omega = 0.0 if tapped else torque / (4.0 * settled)
    return np.array(
        [
            c[4] + sigma * s[4],
            s[4],
            -stiffness * s[4],
            rate[4],
            float(weight @ s[:4] ** 2),
            float(weight @ (s[:4] * rate[:4])),
            float(weight @ rate[:4] ** 2),
            float(np.exp(-step / memory_s)),
            spread,
            theta,
            0.0,
            omega,
        ]
    )


class Likelihood:
    """Minus log likelihood of several records, everything linear and the noise level profiled out.

    Parameters z: sigma and q in units of their scale from the start, then logarithms of the mode's ambient
    variance, of the disturbance variance (both over the block noise) and of its memory in s. Weak normal
    priors on the logarithms keep an absent noise source from running to minus infinity.
    """

    def __init__(self, series: Sequence[Series], sigma: float, q: float, scale: tuple[float, float]) -> None:
        self.series = series
        self.sigma, self.q, self.scale = sigma, q, scale
        self.torque_unit = 4.0 * max(sigma, 0.3) * max(q + sigma**2, 4.0)
        self.samples = sum(len(one.data) for one in series)
        self.fixed = sum(4 if one.tapped else 2 for one in series)
        self.centre = np.array([-1.0, -1.0, np.log(0.3)])
        self.width = np.array([3.0, 3.0, 1.0])
        self.rows = []
        for one in series:
            rows = np.zeros((5 if one.tapped else 3, len(one.data)))
            rows[0] = one.data - one.data.mean()
            rows[1] = 1.0
            rows[2] = one.time_s - one.time_s.mean()
            self.rows.append(rows)
        self.out = [np.empty_like(rows) for rows in self.rows]
        self.columns = [np.empty((6, len(one.data))) for one in series]

    def unpack(self, z: FloatArray) -> tuple[float, float, float, float, float]:
        sigma = self.sigma + self.scale[0] * float(z[0])
        q = self.q + self.scale[1] * float(z[1])
        logs = np.clip(z[2:], -25.0, 25.0)
        torque, spread, memory = (float(value) for value in np.exp(logs))
        return sigma, q, torque * self.torque_unit, spread, float(np.clip(memory, 1e-3, 1e3))

    def squares(self, z: FloatArray) -> tuple[float, float]:
        """Residual sum of squares of the whitened records, and the log determinant."""
        sigma, q, torque, spread, memory = self.unpack(z)
        total = determinant = 0.0
        for one, rows, out, columns in zip(self.series, self.rows, self.out, self.columns, strict=True):
            noise = noise_terms(sigma, q, torque, spread, memory, one.step_s, one.tapped)
            longest = float(one.time_s[-1])
            if not np.all(np.isfinite(noise)) or min(sigma, sigma - np.sqrt(max(-q, 0.0))) * longest < -60.0:
                return np.inf, 0.0
            if one.tapped:
                mode_columns(one.time_s, sigma, q, columns)
                rows[3:5] = columns[:2]
            determinant += whiten(rows, one.steps, noise, out)
            gram = out @ out.T
            size = np.sqrt(np.maximum(np.diag(gram)[1:], 1e-300))
            inner = gram[1:, 1:] / np.outer(size, size)
            across = gram[1:, 0] / size
            total += float(gram[0, 0] - across @ np.linalg.solve(inner + 1e-13 * np.eye(len(size)), across))
        return total, determinant

    def __call__(self, z: FloatArray) -> float:
        total, determinant = self.squares(z)
        if not (np.isfinite(total) and total > 0.0):
            return 1e12
        prior = 0.5 * float(np.sum(((z[2:] - self.centre) / self.width) ** 2))
        return 0.5 * (determinant + (self.samples - self.fixed) * np.log(total)) + prior


def fit_driven(
    tapped: Sequence[TapRecord], quiet: TapRecord | None, sigma: float, q: float, covariance: FloatArray
) -> DrivenFit:
    """Joint state-space fit of tapped records and the quiet one, started at (sigma, q) with their covariance."""
    series = [series_of(record, sigma, q) for record in tapped]
    if quiet is not None:
        series.append(series_of(quiet))
    scale = (
        float(np.clip(2.0 * np.sqrt(covariance[0, 0]), 1e-3, 1.0)),
        float(np.clip(2.0 * np.sqrt(covariance[1, 1]), 1e-2, 20.0)),
    )
    return maximise(Likelihood(series, sigma, q, scale), _first_guess(series))


def maximise(likelihood: Likelihood, guess: FloatArray) -> DrivenFit:
    """Most likely parameters by quasi-Newton steps, covariance from the curvature there."""
    from scipy.optimize import minimize

    best = minimize(
        likelihood, guess, jac=_gradient(likelihood), method="BFGS", options={"gtol": 0.02, "maxiter": 60}
    )
    z = np.asarray(best.x)
    sigma, q, torque, spread, _ = likelihood.unpack(z)
    total, _ = likelihood.squares(z)
    variance = total / max(likelihood.samples - likelihood.fixed - 2, 1)
    ambient = variance * torque / (4.0 * max(sigma, 0.03) * max(q + sigma**2, 0.3))
    covariance, ok = _curvature(likelihood, z)
    scale = np.array(likelihood.scale)
    return DrivenFit(
        sigma,
        q,
        covariance[:2, :2] * np.outer(scale, scale),
        float(np.sqrt(ambient)),
        float(np.sqrt(variance * spread)),
        float(np.sqrt(variance)),
        ok and bool(np.isfinite(best.fun)) and best.fun < 1e11,
    )


def _first_guess(series: Sequence[Series]) -> FloatArray:
    # Second differences see the white noise, the spread of a quiet record (or nothing) the slow part.
    white = float(np.median([np.mean(np.diff(one.data, 2) ** 2) / 6.0 for one in series])) + 1e-300
    quiet = [one for one in series if not one.tapped]
    slow = 0.3
    if quiet:
        basis = orthonormal(np.array([np.ones_like(quiet[0].time_s), quiet[0].time_s]))
        left = quiet[0].data - (basis @ quiet[0].data) @ basis
        slow = max(float(np.mean(left**2)) / white - 1.0, 0.05)
    return np.array([0.0, 0.0, np.log(0.5 * slow), np.log(0.5 * slow), np.log(0.3)])


def _gradient(function: Callable[[FloatArray], float]) -> Callable[[FloatArray], FloatArray]:
    def gradient(z: FloatArray) -> FloatArray:
        here = function(z)
        slopes = np.empty(len(z))
        for k in range(len(z)):
            moved = z.copy()
            moved[k] += 1e-4
            slopes[k] = (function(moved) - here) / 1e-4
        return slopes

    return gradient


def _curvature(function: Callable[[FloatArray], float], z: FloatArray) -> tuple[FloatArray, bool]:
    """Inverse Hessian by central differences, and whether it is positive definite."""
    count = len(z)
    width = np.array([0.1, 0.1, 0.2, 0.2, 0.2])[:count]
    here = function(z)
    hessian = np.empty((count, count))
    ahead, behind = np.empty(count), np.empty(count)
    for i in range(count):
        for sign, store in ((1.0, ahead), (-1.0, behind)):
            moved = z.copy()
            moved[i] += sign * width[i]
            store[i] = function(moved)
        hessian[i, i] = (ahead[i] - 2.0 * here + behind[i]) / width[i] ** 2
    for i in range(count):
        for j in range(i):
            moved = z.copy()
            moved[i] += width[i]
            moved[j] += width[j]
            both = function(moved)
            moved = z.copy()
            moved[i] -= width[i]
            moved[j] -= width[j]
            both += function(moved)
            cross = (both - ahead[i] - behind[i] - ahead[j] - behind[j] + 2.0 * here) / (
                2.0 * width[i] * width[j]
            )
            hessian[i, j] = hessian[j, i] = cross
    values, vectors = np.linalg.eigh(hessian)
    if values[0] <= 1e-6:
        return np.full((count, count), np.nan), False
    return np.asarray((vectors / values) @ vectors.T), True
