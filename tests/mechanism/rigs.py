"""The two mechanisms of the simulated rigs, with the constants their rig files give."""

from __future__ import annotations

import math

from analysis.mechanism.parameters import Carriage, Mechanism

# The reference tables were run with this copper coefficient.
TABLE_COPPER_PER_K = 0.00393

BOOM = Mechanism(
    carriage=Carriage.FLOATING,
    body_mass_kg=0.072,
    cm_height_m=0.030,
    cm_forward_m=0.000711,
    body_inertia_kg_m2=1.5416e-4,
    carriage_mass_kg=0.130,
    flywheel_inertia_kg_m2=2.5e-4,
    motor_resistance_ohm=1.3,
    motor_inductance_h=2.5e-4,
    motor_constant_n_m_per_a=0.0066,
    gear_ratio=6.0,
    hinge_damping_n_m_s=1.2e-4,
    stop_low_rad=math.radians(-4.0),
    stop_high_rad=math.radians(30.0),
    shuttle_mass_kg=0.100,
    shuttle_throw_m=0.024,
    carriage_stiffness_n_per_m=190.0,
    carriage_damping_n_s_per_m=3.8,
    wing_stroke_rad=0.60,
    wing_radius_m=0.045,
    wing_area_m2=0.0045,
    wing_incidence_rad=math.radians(14.0),
    wing_arm_m=0.060,
    wing_inertia_kg_m2=1.2e-6,
    motor_viscous_n_m_s=1e-7,
    motor_coulomb_n_m=4e-4,
)
GEARED = BOOM.with_(
    carriage=Carriage.GEARED,
    carriage_mass_kg=0.030,
    shuttle_mass_kg=0.0,
    shuttle_throw_m=0.0,
    carriage_stiffness_n_per_m=0.0,
    carriage_damping_n_s_per_m=0.0,
    shake_amplitude_m=8.0e-3,
    weight_preloaded=False,
)
UNSHAKEN = BOOM.with_(carriage=Carriage.CLAMPED)
COLUMN = Mechanism(
    carriage=Carriage.GEARED,
    body_mass_kg=0.030,
    cm_height_m=0.062,
    cm_forward_m=0.0,
    body_inertia_kg_m2=1.488e-4,
    carriage_mass_kg=0.040,
    flywheel_inertia_kg_m2=2.5e-4,
    motor_resistance_ohm=1.3,
    motor_inductance_h=2.5e-4,
    motor_constant_n_m_per_a=0.0066,
    gear_ratio=6.0,
    hinge_damping_n_m_s=1.5e-4,
    stop_low_rad=math.radians(-60.0),
    stop_high_rad=math.radians(60.0),
    shake_amplitude_m=8.0e-3,
    weight_preloaded=False,
    motor_viscous_n_m_s=6e-7,
    motor_coulomb_n_m=4e-4,
)
FLUTTER = COLUMN.with_(
    hinge_damping_n_m_s=4e-4,
    flutter_damping_n_m_s=0.02183926,
    flutter_decay_rad_per_s=2.0 * math.pi * 8.0,
    flutter_torque_n_m=2e-2,
)
