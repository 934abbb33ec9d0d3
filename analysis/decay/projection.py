"""Decay rate and slow stiffness by variable projection: only sigma and q are searched."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analysis.decay.model import mode_columns
from analysis.decay.record import TWO_PI

FloatArray = NDArray[np.float64]
STEEPEST_PER_S = 60.0  # no slow mode decays or grows faster


@dataclass(frozen=True)
class ModeFit:
    """Least-squares mode in one record.

    sigma (1/s), q = omega_d^2 (1/s^2), c (2,) coefficients of C and S, residual (n,) after mode and nuisances,
    slopes (2, n): derivative of the model by sigma and q with everything linear projected off.
    """

    sigma: float
    q: float
    c: FloatArray
    residual: FloatArray
    slopes: FloatArray
    converged: bool

    @property
    def rss(self) -> float:
        return float(self.residual @ self.residual)


def starts(
    time: FloatArray, data: FloatArray, basis: FloatArray, top_hz: float, count: int = 3
) -> list[tuple[float, float]]:
    """Promising (sigma, q) pairs from a grid: local maxima of the explained sum of squares, best first.

    time (n,), data (n,), orthonormal nuisance rows basis (k, n), projected off the data here. All sums over time
    are matrix products of envelopes (sigma) with shapes (q), so the whole grid costs a fraction of one fit.
    """
    span = float(time[-1] - time[0])
    omegas = TWO_PI * np.arange(0.35 / span, top_hz, 0.35 / span)
    # Two real poles: splits of the pole pair, in units of 1/span, at the low end of the frequency axis.
    splits = np.array([6.0, 2.5, 0.8]) / span
    qs = np.concatenate((-(splits**2), omegas**2))
    cosine = np.concatenate((np.cosh(np.outer(splits, time)), np.cos(np.outer(omegas, time))))
    sine = np.concatenate((np.sinh(np.outer(splits, time)), np.sin(np.outer(omegas, time))))
    sigmas = np.array([-4.0, -1.5, -0.3, 0.5, 1.5, 3.0, 6.0, 12.0, 25.0]) / span
    envelope = np.exp(-np.outer(sigmas, time))
    square = envelope * envelope
    data = data - (basis @ data) @ basis
    cc, cs, ss = square @ (cosine**2).T, square @ (cosine * sine).T, square @ (sine**2).T
    whole_c, whole_s = cc.copy(), ss.copy()
    for row in basis:
        by_cosine, by_sine = (envelope * row) @ cosine.T, (envelope * row) @ sine.T
        cc -= by_cosine**2
        cs -= by_cosine * by_sine
        ss -= by_sine**2
    cy, sy = (envelope * data) @ cosine.T, (envelope * data) @ sine.T
    determinant = cc * ss - cs * cs
    # Shapes that the nuisances nearly explain leave only rounding behind.
    usable = (cc > 1e-7 * whole_c) & (ss > 1e-7 * whole_s) & (determinant > 1e-7 * cc * ss)
    explained = ss * cy**2 - 2.0 * cs * cy * sy + cc * sy**2
    score = np.where(usable, explained / np.where(usable, determinant, 1.0), 0.0)
    padded = np.pad(score, 1, constant_values=-np.inf)
    rows, columns = score.shape
    shifts = [(i, j) for i in (-1, 0, 1) for j in (-1, 0, 1) if i or j]
    neighbours = np.max([padded[1 + i : 1 + i + rows, 1 + j : 1 + j + columns] for i, j in shifts], axis=0)
    peaks = np.argwhere(score >= neighbours)
    heights = score[peaks[:, 0], peaks[:, 1]]
    order = np.argsort(heights)[::-1][:count]
    order = order[heights[order] >= 0.5 * heights[order[0]]]
    return [(float(sigmas[i]), float(qs[j])) for i, j in peaks[order]]


def refine(
    time: FloatArray,
    data: FloatArray,
    basis: FloatArray,
    sigma: float,
    q: float,
    top_hz: float,
    iterations: int = 40,
) -> ModeFit:
    """Two-parameter Gauss-Newton with damping (Golub & Pereyra 1973, Kaufman's Jacobian 1975).

    data (n,) and basis (k, n) as for `starts`. At every point the mode columns and the model's derivatives are
    projected off the nuisances, then the derivatives off the mode columns; the step solves what is left.
    """
    columns = np.empty((6, len(time)))
    current = _at(time, data, basis, sigma, q, columns)
    damping = 1e-3
    # Neither pole may grow beyond exp(40) within the record: no body does, and nothing overflows.
    growth = min(40.0 / float(time[-1]), STEEPEST_PER_S)
    top_q = (TWO_PI * top_hz) ** 2
    converged = False
    for _ in range(iterations):
        gram = current.slopes @ current.slopes.T
        pull = current.slopes @ current.residual
        scale = np.diag(gram).copy()
        if not np.all(scale > 0.0):
            break
        moved = False
        while damping < 1e8:
            try:
                step = np.linalg.solve(gram + damping * np.diag(scale), pull)
            except np.linalg.LinAlgError:
                damping *= 10.0
                continue
            trial_sigma = float(np.clip(current.sigma + step[0], -growth, STEEPEST_PER_S))
            trial_q = float(np.clip(current.q + step[1], -((growth + min(trial_sigma, 0.0)) ** 2), top_q))
            trial = _at(time, data, basis, trial_sigma, trial_q, columns)
            if trial.rss <= current.rss:
                gained = current.rss - trial.rss
                small = abs(step[0]) < 1e-7 * (1.0 + abs(trial_sigma)) and abs(step[1]) < 1e-7 * (
                    1.0 + abs(trial_q)
                )
                current, moved = trial, True
                damping = max(damping * 0.1, 1e-12)
                converged = small or gained <= 1e-10 * current.rss
                break
            damping *= 8.0
        if not moved:
            converged = True
            break
        if converged:
            break
    return ModeFit(current.sigma, current.q, current.c, current.residual, current.slopes, converged)


def _at(
    time: FloatArray, data: FloatArray, basis: FloatArray, sigma: float, q: float, columns: FloatArray
) -> ModeFit:
    mode_columns(time, sigma, q, columns)
    free = columns - (columns @ basis.T) @ basis
    # Orthonormalise the two mode columns (Gram-Schmidt twice is enough for two).
    first_norm = np.sqrt(free[0] @ free[0])
    first = free[0] / max(first_norm, 1e-300)
    across = first @ free[1]
    second = free[1] - across * first
    second = second - (first @ second) * first
    second_norm = np.sqrt(second @ second)
    second = second / max(second_norm, 1e-300)
    a, b = float(first @ data), float(second @ data)
    residual = data - a * first - b * second
    c2 = b / max(second_norm, 1e-300)
    c1 = (a - across * c2) / max(first_norm, 1e-300)
    slopes = np.array((-(c1 * free[2] + c2 * free[3]), c1 * free[4] + c2 * free[5]))
    slopes -= np.outer(slopes @ first, first) + np.outer(slopes @ second, second)
    return ModeFit(sigma, q, np.array([c1, c2]), residual, slopes, False)
