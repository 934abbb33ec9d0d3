"""How well a level's taps will tell the decay rate: planned before power, from the constants of the rig file."""

from __future__ import annotations

import math
from collections.abc import Sequence

from analysis.averaged import equilibrium
from analysis.mechanism.ambient import noise_density_for_rms
from rig.description import RigDescription

TWO_PI = 2.0 * math.pi
SLOWEST_DECAY_PER_S = 1e-3


def planned_half_width_per_s(
    rig: RigDescription, flap_hz: float, taps: Sequence[tuple[float, float]]
) -> float | None:
    """Half-width (95 %) of the decay rate in 1/s from taps of (impulse in N m s, time watched in s).

    A best case: small swings about the averaged rest, noise of the encoder and, on a simulated rig, its random
    torque. None where the body is not held or creeps back without a swing, where no tap is planned, or where
    every tap would throw it onto an end stop. Tap by tap with `analysis.planning.planned_decay_std`, taps weighted
    by their variances.
    """
    from analysis.planning import (
        planned_decay_std,
    )  # late: SciPy takes time to load, and most callers plan nothing

    mechanism = rig.mechanism
    rest = None if mechanism is None or rig.unknown else equilibrium(mechanism, flap_hz)
    if mechanism is None or rest is None or rest.decay_per_s**2 >= rest.stiffness_per_s2:
        return None
    decay = max(rest.decay_per_s, SLOWEST_DECAY_PER_S)
    body = next(channel for channel in rig.channels if channel.measures == "body angle")
    noise = math.hypot(body.noise, abs(body.scale) / math.sqrt(12.0))
    ambient = _ambient_rms_rad(rig, rest.stiffness_per_s2, decay)
    room = min(mechanism.stop_high_rad - rest.angle_rad, rest.angle_rad - mechanism.stop_low_rad)
    weight = 0.0
    for impulse, watched_s in taps:
        amplitude = abs(impulse) / mechanism.body_inertia_kg_m2 / math.sqrt(rest.stiffness_per_s2)
        if amplitude < room:
            std = planned_decay_std(amplitude, noise, rig.sample_hz, watched_s, decay, ambient, watched_s)
            weight += 1.0 / std**2
    return 1.959964 / math.sqrt(weight) if weight else None


def _ambient_rms_rad(rig: RigDescription, stiffness_per_s2: float, decay_per_s: float) -> float:
    """Restlessness of the slow mode at a level: it grows as the mode softens, s / (2 I sqrt(sigma kappa))."""
    if rig.world is None or rig.mechanism is None:
        return 0.0
    density = rig.world.body_torque_noise_n_m_per_rt_hz
    if density is None:
        density = noise_density_for_rms(rig.mechanism, rig.world.body_torque_rms_rad)
    return density / (2.0 * rig.mechanism.body_inertia_kg_m2 * math.sqrt(decay_per_s * stiffness_per_s2))
