"""The boundary of the textbook vibrated pendulum: undamped, unbiased, shaken at a constant rate.

    x'' + (A - 2 q cos 2 tau) x = 0,   A = -4 g / (L w^2),   q = 2 a / L

is stable for a_0(q) < A < b_1(q): the lower boundary is w = sqrt(-4 g / (L a_0(2 a / L))). The upper one exists
for a/L above 0.454 only. It knows neither damping, lift nor offset: for a mechanism that has them it is a limit
to compare with, not a prediction.

Reference: NIST Digital Library of Mathematical Functions, chapter 28 (characteristic values: scipy.special).
"""

from __future__ import annotations

import math

from analysis.averaged import cm_distance_m, shake_amplitude_m
from analysis.mechanism.parameters import Carriage, Mechanism


def lower_boundary_hz(shake_m: float, length_m: float, gravity_m_per_s2: float = 9.80665) -> float:
    """Flap rate above which a pendulum of equivalent length L = I / (m r) stands upright.

    ValueError for lengths or amplitudes that are not positive.
    """
    if not (shake_m > 0.0 and length_m > 0.0):
        raise ValueError("shake amplitude and length must be positive")
    from scipy.special import mathieu_a

    value = float(mathieu_a(0, 2.0 * shake_m / length_m))
    return math.sqrt(-4.0 * gravity_m_per_s2 / (length_m * value)) / (2.0 * math.pi)


def upper_boundary_hz(shake_m: float, length_m: float, gravity_m_per_s2: float = 9.80665) -> float | None:
    """Flap rate above which it falls again, growing at half the shaking rate; None for a/L below 0.454."""
    from scipy.special import mathieu_b

    value = float(mathieu_b(1, 2.0 * shake_m / length_m))
    if value >= 0.0:
        return None
    return math.sqrt(-4.0 * gravity_m_per_s2 / (length_m * value)) / (2.0 * math.pi)


def mathieu_boundary_hz(mechanism: Mechanism) -> float | None:
    """Lower boundary of a mechanism as if it had neither damping, lift nor offset; None if it is not shaken."""
    if mechanism.carriage is Carriage.CLAMPED:
        return None
    length = mechanism.body_inertia_kg_m2 / (mechanism.body_mass_kg * cm_distance_m(mechanism))
    flap_hz = 50.0
    for _ in range(60):  # the amplitude of a floating carriage depends a little on the rate
        shake = shake_amplitude_m(mechanism, flap_hz)
        if shake <= 0.0:
            return None
        found = lower_boundary_hz(shake, length, mechanism.gravity_m_per_s2)
        if abs(found - flap_hz) < 1e-10 * found:
            return found
        flap_hz = found
    return flap_hz
