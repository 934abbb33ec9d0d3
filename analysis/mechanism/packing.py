"""Mechanism and disturbance as the flat vector that the kernels read."""

from __future__ import annotations

import math

import numpy as np

from analysis.mechanism import equations as eq
from analysis.mechanism.disturbance import Disturbance
from analysis.mechanism.parameters import Mechanism

#: A motor quicker than this (L/R) has its current follow the voltage at once: the longest step would have to
#: resolve it, and a hot winding is quicker still.
QUICK_MOTOR_S = 1.6e-4
#: A load cell that rings faster than this shows the force itself.
STIFF_CELL_HZ = 1000.0
#: Contact of a wing that has play: stiff against the wing's inertia, soft enough for the step.
PLAY_RAD_PER_S = 2200.0
PLAY_DAMPING_RATIO = 0.3


def pack(
    mechanism: Mechanism,
    disturbance: Disturbance | None = None,
    *,
    energies: bool = False,
    always_fine: bool = False,
) -> eq.Vector:
    """Parameter vector for `equations`, shape (PARAMETERS,).

    `energies` asks for the energy accumulators, `always_fine` for the fine steps of the end stops (0.8e-4 s)
    everywhere.
    ValueError for constants that make no mechanism (no inertia, no resistance, a base without spring).
    """
    m, d = mechanism, disturbance or Disturbance()
    for name in ("body_mass_kg", "body_inertia_kg_m2", "flywheel_inertia_kg_m2", "motor_resistance_ohm"):
        if not getattr(m, name) > 0.0:
            raise ValueError(f"{name} must be positive")
    if d.base_mass_kg > 0.0 and not d.base_stiffness_n_per_m > 0.0:
        raise ValueError("a base with mass needs a stiffness")
    if d.backlash_rad > 0.0 and not m.wing_inertia_kg_m2 > 0.0:
        raise ValueError("play between crank and wing needs a wing with inertia")
    p = np.zeros(eq.PARAMETERS)
    p[eq.CARRIAGE] = int(m.carriage)
    p[eq.MASS] = m.body_mass_kg
    p[eq.CM_UP] = m.cm_height_m
    p[eq.CM_FORWARD] = m.cm_forward_m
    p[eq.INERTIA] = m.body_inertia_kg_m2
    p[eq.MOVING] = m.total_mass_kg
    p[eq.SHUTTLE] = m.shuttle_mass_kg
    p[eq.THROW] = m.shuttle_throw_m
    p[eq.SPRING] = m.carriage_stiffness_n_per_m
    p[eq.DAMPER] = m.carriage_damping_n_s_per_m
    p[eq.SHAKE] = m.shake_amplitude_m
    p[eq.PRELOAD] = 1.0 if m.weight_preloaded else 0.0
    p[eq.FLYWHEEL] = m.flywheel_inertia_kg_m2
    p[eq.STROKE] = m.wing_stroke_rad
    p[eq.RADIUS] = m.wing_radius_m
    p[eq.AREA] = m.wing_area_m2
    p[eq.INCIDENCE] = m.wing_incidence_rad
    p[eq.ARM] = m.wing_arm_m
    p[eq.WING_INERTIA] = m.wing_inertia_kg_m2
    p[eq.AIR_DENSITY] = m.air_density_kg_per_m3
    p[eq.FLIP] = max(m.wing_flip_speed_m_per_s, 1e-6)
    p[eq.HINGE_DAMPING] = m.hinge_damping_n_m_s
    p[eq.STICKING] = d.hinge_sticking_n_m
    p[eq.STOP_LOW] = m.stop_low_rad
    p[eq.STOP_HIGH] = m.stop_high_rad
    p[eq.STOP_STIFFNESS] = m.stop_stiffness_n_m_per_rad
    p[eq.STOP_DAMPING] = m.stop_damping_s_per_rad
    p[eq.OHM] = m.motor_resistance_ohm
    quick = m.motor_inductance_h < QUICK_MOTOR_S * m.motor_resistance_ohm
    p[eq.HENRY] = 0.0 if quick else m.motor_inductance_h
    p[eq.TORQUE_CONSTANT] = m.motor_constant_n_m_per_a
    p[eq.GEAR] = m.gear_ratio
    p[eq.VISCOUS] = m.motor_viscous_n_m_s
    p[eq.COULOMB] = m.motor_coulomb_n_m
    p[eq.COULOMB_RATE] = m.motor_coulomb_rad_per_s
    p[eq.COPPER_SLOPE] = m.copper_coefficient_per_k
    p[eq.WINDING_HEAT] = m.winding_capacity_j_per_k
    p[eq.HOUSING_HEAT] = m.housing_capacity_j_per_k
    p[eq.WINDING_PATH] = m.winding_housing_k_per_w
    p[eq.HOUSING_PATH] = m.housing_ambient_k_per_w
    p[eq.AMBIENT] = d.ambient_deg_c
    p[eq.GRAVITY] = m.gravity_m_per_s2
    p[eq.FLUTTER] = m.flutter_damping_n_m_s
    p[eq.FLUTTER_RATE] = m.flutter_decay_rad_per_s
    p[eq.FLUTTER_TORQUE] = m.flutter_torque_n_m
    p[eq.NOISE] = d.torque_noise_n_m_per_rt_hz
    p[eq.SEED] = d.seed
    p[eq.PLAY] = d.backlash_rad
    p[eq.PLAY_STIFFNESS] = m.wing_inertia_kg_m2 * PLAY_RAD_PER_S**2
    p[eq.PLAY_DAMPING] = 2.0 * PLAY_DAMPING_RATIO * m.wing_inertia_kg_m2 * PLAY_RAD_PER_S
    p[eq.BASE_MASS] = d.base_mass_kg
    p[eq.BASE_SPRING] = d.base_stiffness_n_per_m
    p[eq.BASE_DAMPER] = d.base_damping_n_s_per_m
    p[eq.LEAN] = d.off_axis_shake
    p[eq.BENDING] = d.wing_bending
    ringing = 0.0 < d.load_cell_hz <= STIFF_CELL_HZ
    p[eq.CELL_OMEGA] = 2.0 * math.pi * d.load_cell_hz if ringing else 0.0
    p[eq.CELL_DAMPING] = d.load_cell_damping
    p[eq.ENERGIES] = 1.0 if energies else 0.0
    p[eq.ALWAYS_FINE] = 1.0 if always_fine else 0.0
    return p
