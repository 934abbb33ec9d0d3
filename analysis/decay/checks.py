"""Doubts about a decay fit: a second mode, decay that depends on amplitude, a straight-line envelope."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from analysis.decay.model import mode_columns
from analysis.decay.projection import ModeFit, refine, starts
from analysis.decay.record import TapRecord, blocks_of, nuisance_rows, orthonormal
from analysis.decay.uncertainty import bandwidth

FloatArray = NDArray[np.float64]
LOWEST_LINE = 13.0  # twice the periodogram over its mean: no line worth a second mode lies below
MARGIN = 6.0  # by which the Bayesian information criterion must prefer two modes


def doubts(record: TapRecord, mode: ModeFit) -> tuple[str, ...]:
    """Which of "two_modes", "amplitude_dependent", "friction_like" the record gives cause for."""
    if mode.q <= 0.0:
        return ()
    blocks = blocks_of(record.time_s, 60.0)
    if len(blocks.time_s) < 24:
        return ()
    rows = blocks.mean(nuisance_rows(record))
    data = blocks.mean(record.angle_rad)
    found = []
    changing = amplitude_dependence(blocks.time_s, data, rows, mode)
    if changing < 0.005:
        found.append("amplitude_dependent")
    # A straight-line envelope is one whose decay rate changes; without a hint of that it need not be tried.
    if changing < 0.05 and straight_envelope_gain(blocks.time_s, data, rows, mode) > MARGIN:
        found.append("friction_like")
    if second_mode_gain(blocks.time_s, data, rows, mode) > MARGIN:
        found.append("two_modes")
    return tuple(found)


def effective_count(residual: FloatArray) -> float:
    """Number of independent values worth of information in a correlated residual."""
    lags = bandwidth(residual)
    energy = float(residual @ residual)
    if energy <= 0.0:
        return float(len(residual))
    rho = np.array([residual[k:] @ residual[:-k] for k in range(1, lags + 1)]) / energy
    inflation = 1.0 + 2.0 * float(np.sum((1.0 - np.arange(1, lags + 1) / (lags + 1.0)) * rho))
    return len(residual) / max(inflation, 1.0)


def amplitude_dependence(time: FloatArray, data: FloatArray, rows: FloatArray, mode: ModeFit) -> float:
    """p value of an F test: do columns t^2 x envelope (a decay rate that changes) explain what is left?

    Correlated residuals count for less: the degrees of freedom are those of the effective sample.
    """
    from scipy.special import fdtrc

    columns = np.empty((6, len(time)))
    mode_columns(time, mode.sigma, mode.q, columns)
    slopes = np.array((mode.c @ columns[2:4], mode.c @ columns[4:6]))
    simple = orthonormal(np.concatenate((rows, columns[:2], slopes)))
    left = data - (simple @ data) @ simple
    extra = time**2 * columns[:2]
    extra = orthonormal(extra - (extra @ simple.T) @ simple)
    gained = float(np.sum((extra @ left) ** 2))
    rest = float(left @ left) - gained
    free = len(data) - len(simple) - len(extra)
    if free < 4 or rest <= 0.0 or len(extra) == 0:
        return 1.0
    share = effective_count(left) / len(left)
    statistic = share * (gained / len(extra)) / (rest / free)
    return float(fdtrc(len(extra), max(share * free, 2.0), statistic))


def straight_envelope_gain(time: FloatArray, data: FloatArray, rows: FloatArray, mode: ModeFit) -> float:
    """How much the information criterion prefers a straight-line envelope (dry friction) to the exponential.

    Both have the same number of parameters: envelope max(0, 1 - t/T0) against exp(-sigma t), frequency free.
    """
    from scipy.optimize import minimize

    basis = orthonormal(rows)

    def left(stop: float, omega: float) -> float:
        envelope = np.maximum(1.0 - time / stop, 0.0)
        both = orthonormal(
            np.concatenate(
                (basis, (envelope * np.cos(omega * time))[None], (envelope * np.sin(omega * time))[None])
            )
        )
        rest = data - (both @ data) @ both
        return float(rest @ rest)

    columns = np.empty((6, len(time)))
    mode_columns(time, mode.sigma, mode.q, columns)
    both = orthonormal(np.concatenate((basis, columns[:2])))
    exponential = data - (both @ data) @ both
    omega = float(np.sqrt(mode.q))
    if mode.sigma <= 0.02 / time[-1]:
        return 0.0
    count = effective_count(exponential)
    stops = np.array([0.8, 1.2, 1.8, 2.6]) / mode.sigma
    start = min((float(stop) for stop in stops), key=lambda stop: left(stop, omega))
    best = minimize(
        lambda z: left(start * np.exp(z[0]), omega * np.exp(z[1])),
        [0.0, 0.0],
        method="Nelder-Mead",
        options={
            "initial_simplex": [[0.0, 0.0], [0.15, 0.0], [0.0, 0.01]],
            "maxfev": 60,
            "fatol": 0.0,
            "xatol": 1e-3,
        },
    )
    return count * float(np.log((exponential @ exponential) / best.fun)) if best.fun > 0.0 else 0.0


def second_mode_gain(time: FloatArray, data: FloatArray, rows: FloatArray, mode: ModeFit) -> float:
    """How much the information criterion prefers two modes: n log(rss1/rss2) - 4 log n, n effective."""
    columns = np.empty((6, len(time)))
    mode_columns(time, mode.sigma, mode.q, columns)
    slopes = np.array((mode.c @ columns[2:4], mode.c @ columns[4:6]))
    one = orthonormal(np.concatenate((rows, columns[:2], slopes)))
    left = data - (one @ data) @ one
    spectrum = np.abs(np.fft.rfft(left, 2 * len(left))) ** 2
    if 2.0 * float(spectrum.max()) < LOWEST_LINE * float(left @ left):
        return 0.0
    top_hz = 0.4 / float(np.median(np.diff(time)))
    pairs = starts(time, left, one, min(top_hz, 15.0), count=1)
    second = refine(time, left, one, *pairs[0], top_hz, iterations=8)
    first_rss, second_rss = float(left @ left), second.rss
    if second_rss <= 0.0:
        return 0.0
    count = effective_count(left)
    return count * float(np.log(first_rss / second_rss)) - 4.0 * float(np.log(count))
