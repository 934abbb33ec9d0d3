"""What surrounds a mechanism on a simulated bench and what theory leaves out."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Disturbance:
    """Random torque, sticking, play and other effects. All zero: the mechanism alone.

    `torque_noise_n_m_per_rt_hz` is the square root of the two-sided spectral density of a white torque on
    the body: <tau(t) tau(t')> = density^2 delta(t - t').
    """

    seed: int = 1
    torque_noise_n_m_per_rt_hz: float = 0.0
    hinge_sticking_n_m: float = 0.0  # Coulomb friction in the body's hinge that really sticks
    backlash_rad: float = 0.0  # total play between crank and wing, in wing sweep
    base_mass_kg: float = 0.0  # 0: rigid base
    base_stiffness_n_per_m: float = 0.0
    base_damping_n_s_per_m: float = 0.0
    off_axis_shake: float = 0.0  # horizontal over vertical motion of the pivot
    wing_bending: float = 0.0  # relative loss of lift at 40 Hz, growing with flap rate squared
    ambient_deg_c: float = 25.0
    load_cell_hz: float = 0.0  # resonance of the mounted load cell, 0: ideal
    load_cell_damping: float = 0.02  # ratio
