"""One averaged form of the body for pitchfork and fold alike, with the boundary itself as a parameter.

    phi'' + 2 sigma phi' + G(phi; f) = 0
    G = K [ x B(phi) - r sin phi - b (rho q + 1 - rho) ],   q = (f / fc)^2,   x = q h(f) / h(fc)
    h(f) = (1 - (f0 / f)^2)^-2,   B = sin phi cos phi / (1 - mu sin^2 phi)^2

phi is the angle from the direction in which the centre of mass is above the pivot. At f = fc the rest
vanishes at phi = phic, which fixes  r = B'(phic) / cos phic  and  b = B(phic) - r sin phic. phic = 0 is the pitchfork.
The bias is lift that grows with f^2 (rho = 1), a constant torque (rho = 0), or between.

mu and f0 are constants of the rig: the coupling to a floating carriage, (m h)^2 / (I M), and its resonance.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Values = NDArray[np.float64]


@dataclass(frozen=True)
class RigConstants:
    """mu and f0 in Hz; `known` False: taken as 0 because the rig file does not tell them."""

    coupling: float = 0.0
    resonance_hz: float = 0.0
    known: bool = True


def shape(phi: Values, mu: float) -> tuple[Values, Values]:
    """B and B'."""
    sine, cosine = np.sin(phi), np.cos(phi)
    rest = 1.0 - mu * sine**2
    return sine * cosine / rest**2, (cosine**2 - sine**2) / rest**2 + 4.0 * mu * (
        sine * cosine
    ) ** 2 / rest**3


def bias_terms(phic: Values, mu: float) -> tuple[Values, Values]:
    """r and b that put the fold at phic."""
    value, slope = shape(phic, mu)
    r = slope / np.cos(phic)
    return r, value - r * np.sin(phic)


def shaking(flap_hz: Values, fc: Values, resonance_hz: float) -> Values:
    """x(f): shaking relative to that at the boundary."""
    ratio = (1.0 - (resonance_hz / fc) ** 2) / (1.0 - (resonance_hz / flap_hz) ** 2)
    return (flap_hz / fc) ** 2 * ratio**2


def stable_root(x: Values, r: Values, bias: Values, mu: float) -> Values:
    """The stable rest phi of x B - r sin phi = bias, NaN where there is none; arrays broadcast together.

    Newton from phi = 0 approaches the nearest root monotonically, for the left side is concave up to its
    maximum (convex for a bias of the other sign, by symmetry).
    """
    sign = np.sign(bias)
    target = np.abs(bias)
    phi = np.zeros(np.broadcast_shapes(x.shape, r.shape, bias.shape))
    for _ in range(60):
        value, slope = shape(phi, mu)
        left = x * value - r * np.sin(phi) - target
        steep = x * slope - r * np.cos(phi)
        step = np.where(steep > 1e-9, -left / np.where(steep > 1e-9, steep, 1.0), np.nan)
        phi = phi + np.clip(step, -0.2, 0.2)
        if not np.any(np.abs(step) > 1e-10):
            break
    value, slope = shape(phi, mu)
    found = (x * slope - r * np.cos(phi) > 0.0) & (np.abs(x * value - r * np.sin(phi) - target) < 1e-7)
    return np.where(found & (phi < 1.3), phi * np.where(sign == 0.0, 1.0, sign), np.nan)


def stiffness_shape(x: Values, r: Values, phi: Values, mu: float) -> Values:
    """kappa / K at a rest."""
    return x * shape(phi, mu)[1] - r * np.cos(phi)


@dataclass(frozen=True)
class FittedForm:
    """A fitted form: fc Hz, phic rad, K 1/s^2, angle = offset + gain * phi."""

    boundary_hz: float
    fold_rad: float
    rate_per_s2: float
    offset_rad: float
    gain: float
    rho: float
    constants: RigConstants

    def terms(self, flap_hz: float) -> tuple[float, float, float]:
        """x, r and the bias at a flap rate."""
        fc, f = np.array(self.boundary_hz), np.array(flap_hz)
        r, b = bias_terms(np.array(self.fold_rad), self.constants.coupling)
        q = (flap_hz / self.boundary_hz) ** 2
        return (
            float(shaking(f, fc, self.constants.resonance_hz)),
            float(r),
            float(b) * (self.rho * q + 1.0 - self.rho),
        )

    def rest_rad(self, flap_hz: float) -> float:
        """phi of the stable rest; NaN below the boundary."""
        x, r, bias = (np.array(term) for term in self.terms(flap_hz))
        return float(stable_root(x, r, bias, self.constants.coupling))

    def angle_rad(self, flap_hz: float) -> float:
        """Mean body angle at a flap rate."""
        return self.offset_rad + self.gain * self.rest_rad(flap_hz)

    def stiffness_per_s2(self, flap_hz: float) -> float:
        x, r, _ = (np.array(term) for term in self.terms(flap_hz))
        phi = np.array(self.rest_rad(flap_hz))
        return self.rate_per_s2 * float(stiffness_shape(x, r, phi, self.constants.coupling))

    def softening(self, flap_hz: float) -> float:
        """Relative change of the fitted stiffness per rad^2 of initial amplitude.

        Poincare-Lindstedt averaged over the decay: 2 [3 b3 / (8 kappa) - 5 a2^2 / (12 kappa^2)] / 4 with
        a2 = G''/2, b3 = G'''/6.
        """
        x, r, bias = self.terms(flap_hz)
        phi, mu, step = self.rest_rad(flap_hz), self.constants.coupling, 1e-3

        def torque(at: float) -> float:
            value, _ = shape(np.array(at), mu)
            return self.rate_per_s2 * (x * float(value) - r * float(np.sin(at)) - bias)

        points = [torque(phi + k * step) for k in (-2, -1, 0, 1, 2)]
        kappa = (points[3] - points[1]) / (2.0 * step)
        a2 = (points[3] - 2.0 * points[2] + points[1]) / step**2 / 2.0
        b3 = (points[4] - 2.0 * points[3] + 2.0 * points[1] - points[0]) / (2.0 * step**3) / 6.0
        if kappa <= 0.0:
            return float("nan")
        return 0.5 * (3.0 * b3 / (8.0 * kappa) - 5.0 * a2**2 / (12.0 * kappa**2))
