"""How strong a random torque must be for the slow mode to be as restless as asked."""

from __future__ import annotations

import math

from analysis.averaged import averaged_fold, decay_per_s, equilibrium
from analysis.mechanism.parameters import Carriage, Mechanism

#: The ambient motion is told for a drive this many times above the boundary.
ABOVE = 1.2


def noise_density_for_rms(mechanism: Mechanism, rms_rad: float) -> float:
    """Density of a white torque on the body, N m per root Hz (two-sided), for an ambient rms of the slow mode.

    A mode x'' + 2 sigma x' + kappa x = tau / I under <tau tau> = s^2 delta has the variance
    s^2 / (4 sigma kappa I^2); sigma and kappa are the averaged ones at 1.2 times the averaged boundary. A body
    without a boundary (clamped carriage) gets what it would have if its carriage were geared by 8 mm.
    """
    shaken = mechanism
    boundary = averaged_fold(shaken)
    if boundary is None:
        shaken = mechanism.with_(carriage=Carriage.GEARED, shake_amplitude_m=8e-3)
        boundary = averaged_fold(shaken)
    rest = None if boundary is None else equilibrium(shaken, ABOVE * boundary.flap_hz)
    if boundary is None or rest is None:
        return 0.0
    sigma = abs(decay_per_s(shaken, ABOVE * boundary.flap_hz))
    return rms_rad * mechanism.body_inertia_kg_m2 * math.sqrt(4.0 * sigma * rest.stiffness_per_s2)
