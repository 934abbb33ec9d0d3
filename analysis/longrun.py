"""How well a mean is known when neighbouring values are correlated."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


def burg(series: FloatArray, order: int) -> tuple[FloatArray, float]:
    """Autoregressive coefficients (x[t] = sum a[k] x[t-1-k] + e) and innovation variance, Burg's method."""
    forward = series[1:].astype(float)
    backward = series[:-1].astype(float)
    coefficients = np.zeros(0)
    variance = float(np.mean(series**2))
    for _ in range(order):
        power = float(forward @ forward + backward @ backward)
        if power <= 0.0:
            break
        reflection = 2.0 * float(forward @ backward) / power
        coefficients = np.append(coefficients - reflection * coefficients[::-1], reflection)
        variance *= 1.0 - reflection**2
        forward, backward = (forward - reflection * backward)[1:], (backward - reflection * forward)[:-1]
    return coefficients, variance


def autocovariance(coefficients: FloatArray, variance: float, lags: int) -> FloatArray:
    """Autocovariance at lags 0..lags-1 of an autoregressive process, from its power spectrum."""
    size = 1 << max(12, int(np.ceil(np.log2(4 * lags))))
    response = np.fft.rfft(np.concatenate(([1.0], -coefficients)), size)
    # A pole on the unit circle (a series that is one pure line) would divide by zero at its frequency.
    power = np.maximum(np.abs(response) ** 2, 1e-12)
    return np.asarray(np.fft.irfft(variance / power, size)[:lags])


def mean_variance(series: FloatArray) -> float:
    """Variance of the mean of equally spaced values, their serial correlation included.

    An autoregressive model (order 0..3 by the corrected Akaike criterion) gives the autocovariance g[k];
    the result is sum over |k| < n of (1 - |k|/n) g[k] / n. An oscillating series (ringing left in the
    window) therefore gets a small variance, a slowly wandering one a large one. Misleads when the window is
    shorter than the correlation time: then no estimate from the window alone can be right.
    """
    values = np.asarray(series, dtype=float)
    count = len(values)
    if count < 2:
        return float("nan")
    centred = values - values.mean()
    if not np.any(centred):
        return 0.0
    best_score, best = np.inf, (np.zeros(0), float(centred @ centred) / (count - 1))
    for order in range(min(4, max(1, count // 4))):
        coefficients, variance = burg(centred, order)
        free = order + 2
        if variance <= 0.0 or count - free - 1 <= 0:
            break
        score = count * np.log(variance) + 2.0 * free * count / (count - free - 1)
        if score < best_score:
            best_score, best = score, (coefficients, variance * count / (count - free + 1))
    covariance = autocovariance(best[0], best[1], count)
    weights = 1.0 - np.arange(count) / count
    total = covariance[0] + 2.0 * float(weights[1:] @ covariance[1:])
    # An anticorrelated fit can claim absurdly little; independent values never get below this share.
    return float(max(total, 0.02 * covariance[0])) / count
