"""Constants of a flapping mechanism: one record for the simulated plants and for the theory.

SI units throughout, angles in rad. The symbols in the comments are those of the equations of motion
(`analysis.mechanism.equations`).
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from enum import IntEnum


class Carriage(IntEnum):
    """How the pivot is tied to the crank."""

    FLOATING = 0  # on a spring, shaken by the shuttle
    GEARED = 1  # height = shake_amplitude * sin(crank)
    CLAMPED = 2  # does not move: the control without shaking


@dataclass(frozen=True)
class Mechanism:
    """One mechanism. Fields left at 0 switch the corresponding part off."""

    carriage: Carriage
    body_mass_kg: float  # m
    cm_height_m: float  # h, centre of mass above the pivot
    cm_forward_m: float  # d, centre of mass towards the head
    body_inertia_kg_m2: float  # I, about the pivot
    carriage_mass_kg: float  # Mc
    flywheel_inertia_kg_m2: float  # J, at the crank, motor included
    motor_resistance_ohm: float  # R0 at 25 degC
    motor_inductance_h: float  # L
    motor_constant_n_m_per_a: float  # Kt = Ke
    gear_ratio: float  # N
    hinge_damping_n_m_s: float  # ch
    stop_low_rad: float
    stop_high_rad: float
    shuttle_mass_kg: float = 0.0  # ms
    shuttle_throw_m: float = 0.0  # s
    carriage_stiffness_n_per_m: float = 0.0  # ky
    carriage_damping_n_s_per_m: float = 0.0  # cy
    weight_preloaded: bool = True
    shake_amplitude_m: float = 0.0  # a, geared carriage only
    wing_stroke_rad: float = 0.0  # Phi, half amplitude
    wing_radius_m: float = 0.0  # r2
    wing_area_m2: float = 0.0  # S
    wing_incidence_rad: float = 0.0  # al0
    wing_arm_m: float = 0.0  # lh
    wing_inertia_kg_m2: float = 0.0  # Iw
    air_density_kg_per_m3: float = 1.2  # rho
    wing_flip_speed_m_per_s: float = 0.15  # usm
    stop_stiffness_n_m_per_rad: float = 30.0  # ks
    stop_damping_s_per_rad: float = 8.0  # bs
    motor_viscous_n_m_s: float = 0.0  # bm, motor side
    motor_coulomb_n_m: float = 0.0  # tauc, motor side
    motor_coulomb_rad_per_s: float = 10.0  # wc
    copper_coefficient_per_k: float = 0.003854  # of resistance, referred to 25 degC
    winding_capacity_j_per_k: float = 4.0  # Cw
    housing_capacity_j_per_k: float = 45.0  # Ch
    winding_housing_k_per_w: float = 6.0  # Rwh
    housing_ambient_k_per_w: float = 14.0  # Rha
    gravity_m_per_s2: float = 9.80665
    # Hinge bushings that make negative damping at low speed: the flutter variant.
    flutter_damping_n_m_s: float = 0.0  # cF
    flutter_decay_rad_per_s: float = 1.0  # wF
    flutter_torque_n_m: float = 0.02  # tF

    @property
    def equivalent_length_m(self) -> float:
        """I / (m h)."""
        return self.body_inertia_kg_m2 / (self.body_mass_kg * self.cm_height_m)

    @property
    def total_mass_kg(self) -> float:
        """Everything that moves with the carriage, M = m + Mc + ms."""
        return self.body_mass_kg + self.carriage_mass_kg + self.shuttle_mass_kg

    def with_(self, **changes: object) -> Mechanism:
        """A copy with some constants changed."""
        return replace(self, **changes)  # type: ignore[arg-type]

    @classmethod
    def names(cls) -> tuple[str, ...]:
        return tuple(field.name for field in fields(cls))
