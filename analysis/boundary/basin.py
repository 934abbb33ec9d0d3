"""Which tap is survived: the averaged body with fitted constants, thrown from its rest.

    phi'' = -2 sigma phi' - G(phi; f),   phi(0) = stable rest,   phi'(0) = +-v

v_c(f) is the smallest kick that passes the saddle or touches a stop. Losses begin at 0.7 v_c ("certain" below)
and half of the taps are lost at 0.8 to 1.06 v_c ("expected" limit at v_c).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analysis.boundary.form import FittedForm
from analysis.kernel import kernel

CERTAIN = 0.7
STEP_S = 2e-3
LONGEST_S = 4.0
BISECTIONS = 16


@kernel
def _survives(
    terms: NDArray[np.float64], start: float, kick: float, low: float, high: float, step: float, steps: int
) -> bool:
    """Whether a kicked body stays between low and high; terms = x, r, bias, mu, K, sigma."""
    x, r, bias, mu, rate, sigma = terms[0], terms[1], terms[2], terms[3], terms[4], terms[5]
    phi, omega = start, kick
    for _ in range(steps):
        # Midpoint rule: the swing takes hundreds of steps.
        sine, cosine = math.sin(phi), math.cos(phi)
        rest = 1.0 - mu * sine * sine
        force = -rate * (x * sine * cosine / (rest * rest) - r * sine - bias) - 2.0 * sigma * omega
        half, speed = phi + 0.5 * step * omega, omega + 0.5 * step * force
        sine, cosine = math.sin(half), math.cos(half)
        rest = 1.0 - mu * sine * sine
        force = -rate * (x * sine * cosine / (rest * rest) - r * sine - bias) - 2.0 * sigma * speed
        phi += step * speed
        omega += step * force
        if phi <= low or phi >= high:
            return False
    return True


@dataclass(frozen=True)
class Basin:
    """A fitted form with what limits the swing: decay rate 1/s and the stops as body angles, rad."""

    form: FittedForm
    decay_per_s: float
    stop_low_rad: float
    stop_high_rad: float

    def critical_kick(self, flap_hz: float, sign: float) -> float:
        """Smallest kick in rad/s, towards `sign`, that loses the body; 0 below the boundary, inf if none does."""
        form = self.form
        if flap_hz <= form.boundary_hz:
            return 0.0
        x, r, bias = form.terms(flap_hz)
        mu = form.constants.coupling
        terms = np.array([x, r, bias, mu, form.rate_per_s2, self.decay_per_s])
        start = form.rest_rad(flap_hz)
        if not math.isfinite(start):
            return 0.0
        ends = sorted(
            (stop - form.offset_rad) / form.gain for stop in (self.stop_low_rad, self.stop_high_rad)
        )
        steps = int(LONGEST_S / STEP_S)
        low, high = 0.0, 0.05
        while _survives(terms, start, sign * high, ends[0], ends[1], STEP_S, steps):
            low, high = high, 2.0 * high
            if high > 100.0:
                return math.inf
        for _ in range(BISECTIONS):
            middle = 0.5 * (low + high)
            if _survives(terms, start, sign * middle, ends[0], ends[1], STEP_S, steps):
                low = middle
            else:
                high = middle
        return 0.5 * (low + high)

    def survived_from(self, kick_rad_per_s: float, share: float = 1.0) -> float:
        """Lowest flap rate (Hz) from which a kick is at most `share` of the critical one; NaN above 2 fc."""
        sign = math.copysign(1.0, kick_rad_per_s)
        wanted = abs(kick_rad_per_s) / share
        low, high = self.form.boundary_hz, 2.0 * self.form.boundary_hz
        if self.critical_kick(high, sign) < wanted:
            return math.nan
        for _ in range(20):
            middle = 0.5 * (low + high)
            if self.critical_kick(middle, sign) < wanted:
                low = middle
            else:
                high = middle
        return high
