"""Covariance of (sigma, q): ordinary least squares, and robust against correlated noise."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


def least_squares_covariance(slopes: FloatArray, residual: FloatArray, fitted: int) -> FloatArray:
    """(2, 2) covariance s^2 (J J^T)^-1 with s^2 = rss / (n - fitted); slopes (2, n)."""
    variance = float(residual @ residual) / max(len(residual) - fitted, 1)
    return np.asarray(variance * np.linalg.inv(slopes @ slopes.T))


def robust_covariance(
    slopes: FloatArray, residual: FloatArray, fitted: int, lags: int | None = None
) -> FloatArray:
    """(2, 2) covariance allowing for heteroscedastic, serially correlated noise.

    Newey & West, Econometrica 55 (1987) 703: (J J^T)^-1 L (J J^T)^-1 with L the Bartlett-weighted sum of
    autocovariances of the scores residual * slopes. `lags` None: the plug-in rule for a first-order
    autoregression of Andrews, Econometrica 59 (1991) 817. Falls short when the noise stays correlated over a
    good part of the record, as with a mode driven by random torque: then use the record before the tap.
    """
    count = len(residual)
    scores = slopes * residual
    if lags is None:
        lags = bandwidth(residual)
    bread = np.linalg.inv(slopes @ slopes.T)
    size = 1 << int(np.ceil(np.log2(count + lags + 1)))
    spectrum = np.fft.rfft(scores, size, axis=1)
    weights = 1.0 - np.arange(1, lags + 1) / (lags + 1.0)
    meat = np.empty((2, 2))
    for i in range(2):
        for j in range(2):
            cross = np.fft.irfft(spectrum[i] * np.conj(spectrum[j]), size)
            meat[i, j] = cross[0] + float(weights @ (cross[1 : lags + 1] + cross[-1 : -lags - 1 : -1]))
    return np.asarray(bread @ meat @ bread) * count / max(count - fitted, 1)


def bandwidth(residual: FloatArray) -> int:
    """Bartlett lags for a first-order autoregression, at most a fifth of the record."""
    energy = float(residual[:-1] @ residual[:-1])
    rho = float(np.clip((residual[1:] @ residual[:-1]) / energy, -0.97, 0.97)) if energy > 0.0 else 0.0
    alpha = 4.0 * rho**2 / ((1.0 - rho) ** 2 * (1.0 + rho) ** 2)
    lags = 1.1447 * (alpha * len(residual)) ** (1.0 / 3.0)
    return int(np.clip(lags, 1, len(residual) // 5))
