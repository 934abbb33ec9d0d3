"""Motor and load at a steady drive: flap rate, current and drive from the balance of mean torques over a turn."""

from __future__ import annotations

import math

from analysis.averaged import TWO_PI, shake_amplitude_m
from analysis.mechanism.parameters import Mechanism


def load_torque_n_m(mechanism: Mechanism, rate_rad_per_s: float) -> float:
    """Mean torque at the crank against the motor: friction, wings, carriage damping."""
    rate = rate_rad_per_s
    if rate <= 0.0:
        return 0.0
    motor_rate = mechanism.gear_ratio * rate
    friction = mechanism.motor_viscous_n_m_s * motor_rate + mechanism.motor_coulomb_n_m * math.tanh(
        motor_rate / mechanism.motor_coulomb_rad_per_s
    )
    speed = mechanism.wing_radius_m * mechanism.wing_stroke_rad * rate
    drag = 1.92 - 1.55 * math.cos(2.04 * mechanism.wing_incidence_rad - math.radians(9.82))
    wings = (
        0.5
        * mechanism.air_density_kg_per_m3
        * mechanism.wing_area_m2
        * drag
        * speed**3
        * 4.0
        / (3.0 * math.pi)
    )
    shake = shake_amplitude_m(mechanism, rate / TWO_PI) * rate
    carriage = 0.5 * mechanism.carriage_damping_n_s_per_m * shake**2
    return mechanism.gear_ratio * friction + (wings + carriage) / rate


def resistance_ohm(mechanism: Mechanism, winding_deg_c: float) -> float:
    return mechanism.motor_resistance_ohm * (
        1.0 + mechanism.copper_coefficient_per_k * (winding_deg_c - 25.0)
    )


def drive_for_flap_v(
    mechanism: Mechanism, flap_hz: float, winding_deg_c: float = 25.0
) -> tuple[float, float]:
    """Drive in V that keeps a flap rate, and its mean motor current in A."""
    rate = TWO_PI * flap_hz
    constant = mechanism.motor_constant_n_m_per_a * mechanism.gear_ratio
    current = load_torque_n_m(mechanism, rate) / constant
    return resistance_ohm(mechanism, winding_deg_c) * current + constant * rate, current


def steady_flap_hz(mechanism: Mechanism, drive_v: float, winding_deg_c: float = 25.0) -> tuple[float, float]:
    """Flap rate in Hz and mean motor current in A at a constant drive; (0, stall current) if it does not turn."""
    constant = mechanism.motor_constant_n_m_per_a * mechanism.gear_ratio
    low, high = 0.0, max(drive_v, 0.0) / constant / TWO_PI
    for _ in range(60):
        middle = 0.5 * (low + high)
        if drive_for_flap_v(mechanism, middle, winding_deg_c)[0] < drive_v:
            low = middle
        else:
            high = middle
    current = (drive_v - constant * TWO_PI * low) / resistance_ohm(mechanism, winding_deg_c)
    return low, current
