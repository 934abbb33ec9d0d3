"""Whitening of angle records by the noise a bench has: compiled Kalman filter.

State (theta, omega, d): the slow mode pushed by white torque, and an Ornstein-Uhlenbeck disturbance of the
measured angle; measured is theta + d + white noise of unit variance. The free swing and everything linear
are handed in as rows and pass through the same filter, so what comes out is white noise for least squares.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from analysis.kernel import kernel

FloatArray = NDArray[np.float64]


@kernel
def whiten(rows: FloatArray, steps: NDArray[np.int64], noise: FloatArray, out: FloatArray) -> float:
    """Standardised innovations of rows (k, n) into out; returns the log determinant of their variances.

    steps (n,): blocks since the previous one (1 without losses). noise (12,): transition of the mode
    (4), its process covariance over one step (3: aa, ab, bb), OU factor and OU variance, initial mode
    covariance (3).
    """
    count, width = rows.shape[1], rows.shape[0]
    f00, f01, f10, f11 = noise[0], noise[1], noise[2], noise[3]
    q00, q01, q11 = noise[4], noise[5], noise[6]
    keep, spread = noise[7], noise[8]
    push = spread * (1.0 - keep * keep)
    p00, p01, p11 = noise[9], noise[10], noise[11]
    p02, p12, p22 = 0.0, 0.0, spread
    state = np.zeros((width, 3))
    total = 0.0
    steady = False
    s = k0 = k1 = k2 = root = 0.0
    log_s = 0.0
    for i in range(count):
        if i > 0:
            for _ in range(steps[i]):
                if not steady or steps[i] > 1:
                    a00 = f00 * p00 + f01 * p01
                    a01 = f00 * p01 + f01 * p11
                    a10 = f10 * p00 + f11 * p01
                    a11 = f10 * p01 + f11 * p11
                    a02 = f00 * p02 + f01 * p12
                    a12 = f10 * p02 + f11 * p12
                    p00 = a00 * f00 + a01 * f01 + q00
                    p01 = a00 * f10 + a01 * f11 + q01
                    p11 = a10 * f10 + a11 * f11 + q11
                    p02 = a02 * keep
                    p12 = a12 * keep
                    p22 = p22 * keep * keep + push
                for j in range(width):
                    theta = state[j, 0]
                    state[j, 0] = f00 * theta + f01 * state[j, 1]
                    state[j, 1] = f10 * theta + f11 * state[j, 1]
                    state[j, 2] *= keep
            if steps[i] > 1:
                steady = False
        if not steady:
            h0, h1, h2 = p00 + p02, p01 + p12, p02 + p22
            before = s
            s = h0 + h2 + 1.0
            root = np.sqrt(s)
            log_s = np.log(s)
            g0, g1 = k0, k1
            k0, k1, k2 = h0 / s, h1 / s, h2 / s
            p00 -= k0 * h0
            p01 -= k0 * h1
            p02 -= k0 * h2
            p11 -= k1 * h1
            p12 -= k1 * h2
            p22 -= k2 * h2
            # Once gain and variance stand, they stay: the rest costs a fifth.
            steady = (
                i > 20
                and abs(s - before) < 1e-9 * s
                and abs(k0 - g0) < 1e-8 * (1e-3 + abs(k0))
                and abs(k1 - g1) < 1e-8 * (1e-3 + abs(k1))
            )
        total += log_s
        for j in range(width):
            gap = rows[j, i] - state[j, 0] - state[j, 2]
            out[j, i] = gap / root
            state[j, 0] += k0 * gap
            state[j, 1] += k1 * gap
            state[j, 2] += k2 * gap
    return total
