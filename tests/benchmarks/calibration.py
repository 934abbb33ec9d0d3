"""A fixed piece of arithmetic that tells how fast this machine is just now, for ratios that travel.

One unit is one call of `kernel_seconds`: 2,000,000 steps of a logistic map with one sine each, in numba, on one
core. Run it interleaved with what is measured: a shared machine changes its speed from second to second.
"""

from __future__ import annotations

import math
import time

from numba import njit

STEPS = 2_000_000


@njit
def _work(steps: int) -> float:
    x, total = 0.3, 0.0
    for _ in range(steps):
        x = 3.7 * x * (1.0 - x)
        total += math.sin(x)
    return total


def kernel_seconds() -> float:
    """Seconds one calibration unit takes now."""
    if not _work.signatures:
        _work(10)
    start = time.perf_counter()
    _work(STEPS)
    return time.perf_counter() - start
