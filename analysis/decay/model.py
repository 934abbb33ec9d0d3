"""The free decay of a second-order mode, analytic from growth to two real poles; compiled.

    y(t) = exp(-sigma t) [c1 C(q, t) + c2 S(q, t)],   q = omega_d^2
    C = cos(sqrt(q) t), S = sin(sqrt(q) t)/sqrt(q);   q = 0: 1 and t;   q < 0: hyperbolic, two real poles

Both are entire functions of q, so nothing is singular at critical damping (sigma > 0, q = 0).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from analysis.kernel import kernel

FloatArray = NDArray[np.float64]


@kernel
def mode_columns(time: FloatArray, sigma: float, q: float, out: FloatArray) -> None:
    """Fill out (6, n): exp(-sigma t) times C, S, t C, t S, dC/dq, dS/dq."""
    root = np.sqrt(abs(q))
    for k in range(time.shape[0]):
        t = time[k]
        z = q * t * t
        if abs(z) < 1e-2:
            c = 1.0 - z / 2.0 * (1.0 - z / 12.0 * (1.0 - z / 30.0 * (1.0 - z / 56.0)))
            s = t * (1.0 - z / 6.0 * (1.0 - z / 20.0 * (1.0 - z / 42.0 * (1.0 - z / 72.0))))
            ds = -(t**3) / 6.0 * (1.0 - z / 10.0 * (1.0 - z / 28.0 * (1.0 - z / 54.0)))
            envelope = np.exp(-sigma * t)
        elif q > 0.0:
            c = np.cos(root * t)
            s = np.sin(root * t) / root
            ds = (t * c - s) / (2.0 * q)
            envelope = np.exp(-sigma * t)
        else:
            # exp(-sigma t) cosh(r t) written with both exponents joined: neither overflows alone.
            slow = np.exp((root - sigma) * t)
            fast = np.exp((-root - sigma) * t)
            c = 0.5 * (slow + fast)
            s = 0.5 * (slow - fast) / root
            ds = (t * c - s) / (2.0 * q)
            envelope = 1.0
        out[0, k] = envelope * c
        out[1, k] = envelope * s
        out[2, k] = t * out[0, k]
        out[3, k] = t * out[1, k]
        out[4, k] = -0.5 * out[3, k]
        out[5, k] = envelope * ds
