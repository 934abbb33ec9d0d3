"""The constants of a mechanism as a rig file names them, and the field and kind of quantity each one is."""

from __future__ import annotations

from analysis.mechanism.parameters import Carriage

CARRIAGES = {"floating": Carriage.FLOATING, "geared": Carriage.GEARED, "clamped": Carriage.CLAMPED}

#: Key in [mechanism] -> (field of Mechanism, kind, whether zero is allowed).
CONSTANTS: dict[str, tuple[str, str, bool]] = {
    "body_mass": ("body_mass_kg", "mass", False),
    "cm_height": ("cm_height_m", "length", False),
    "cm_forward": ("cm_forward_m", "length", True),
    "body_inertia": ("body_inertia_kg_m2", "inertia", False),
    "carriage_mass": ("carriage_mass_kg", "mass", True),
    "flywheel_inertia": ("flywheel_inertia_kg_m2", "inertia", False),
    "motor_resistance": ("motor_resistance_ohm", "resistance", False),
    "motor_inductance": ("motor_inductance_h", "inductance", False),
    "motor_constant": ("motor_constant_n_m_per_a", "torque constant", False),
    "hinge_damping": ("hinge_damping_n_m_s", "angular damping", True),
    "shuttle_mass": ("shuttle_mass_kg", "mass", True),
    "shuttle_throw": ("shuttle_throw_m", "length", True),
    "carriage_stiffness": ("carriage_stiffness_n_per_m", "stiffness", True),
    "carriage_damping": ("carriage_damping_n_s_per_m", "damping", True),
    "shake_amplitude": ("shake_amplitude_m", "length", True),
    "wing_stroke": ("wing_stroke_rad", "angle", True),
    "wing_radius": ("wing_radius_m", "length", True),
    "wing_area": ("wing_area_m2", "area", True),
    "wing_incidence": ("wing_incidence_rad", "angle", True),
    "wing_arm": ("wing_arm_m", "length", True),
    "wing_inertia": ("wing_inertia_kg_m2", "inertia", True),
    "air_density": ("air_density_kg_per_m3", "density", False),
    "wing_flip_speed": ("wing_flip_speed_m_per_s", "speed", False),
    "stop_stiffness": ("stop_stiffness_n_m_per_rad", "angular stiffness", False),
    "stop_damping": ("stop_damping_s_per_rad", "s per rad", True),
    "motor_viscous": ("motor_viscous_n_m_s", "angular damping", True),
    "motor_coulomb": ("motor_coulomb_n_m", "torque", True),
    "motor_coulomb_rate": ("motor_coulomb_rad_per_s", "angular rate", False),
    "copper_coefficient": ("copper_coefficient_per_k", "temperature coefficient", True),
    "winding_capacity": ("winding_capacity_j_per_k", "heat capacity", False),
    "housing_capacity": ("housing_capacity_j_per_k", "heat capacity", False),
    "winding_housing": ("winding_housing_k_per_w", "thermal resistance", False),
    "housing_ambient": ("housing_ambient_k_per_w", "thermal resistance", False),
    "gravity": ("gravity_m_per_s2", "acceleration", False),
    "flutter_damping": ("flutter_damping_n_m_s", "angular damping", True),
    "flutter_decay": ("flutter_decay_rad_per_s", "angular rate", False),
    "flutter_torque": ("flutter_torque_n_m", "torque", False),
}

#: Without these no mechanism can be described; each may be "unknown".
REQUIRED = (
    "body_mass",
    "cm_height",
    "cm_forward",
    "body_inertia",
    "carriage_mass",
    "flywheel_inertia",
    "motor_resistance",
    "motor_inductance",
    "motor_constant",
    "hinge_damping",
)
#: What a kind of carriage needs besides.
REQUIRED_FOR = {
    "floating": ("shuttle_mass", "shuttle_throw", "carriage_stiffness", "carriage_damping"),
    "geared": ("shake_amplitude",),
    "clamped": (),
}
