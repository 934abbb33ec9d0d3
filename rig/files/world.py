"""Reading `[simulation]`: what a simulated bench adds to the mechanism."""

from __future__ import annotations

from rig.description import SimulatedWorld
from rig.files.table import Table


def read_world(table: Table) -> SimulatedWorld:
    usual = SimulatedWorld()

    def take(key: str, kind: str, default: float, low: float = 0.0) -> float:
        value = table.quantity(key, kind, default, low=low)
        return default if value is None else value

    world = SimulatedWorld(
        seed=table.integer("seed", usual.seed, 0, 2**31 - 1),
        body_torque_rms_rad=take("ambient_rms", "angle", usual.body_torque_rms_rad),
        body_torque_noise_n_m_per_rt_hz=table.quantity("torque_noise", "torque density", low=0.0),
        winding_start_deg_c=take("winding_start", "temperature", usual.winding_start_deg_c, -40.0),
        ambient_deg_c=take("ambient_temperature", "temperature", usual.ambient_deg_c, -40.0),
        tap_duration_s=table.quantity("tap_duration", "time", usual.tap_duration_s, low=1e-3, high=0.1)
        or 0.01,
        tap_scatter=take("tap_scatter", "share", usual.tap_scatter),
        hinge_sticking_n_m=take("hinge_sticking", "torque", 0.0),
        load_drift_n_per_rt_s=take("load_drift", "force drift", 0.0),
        clock_error_ppm=take("clock_error", "ppm", 0.0, -1000.0),
        lost_frame_probability=table.quantity("lost_frames", "share", 0.0, low=0.0, high=0.5) or 0.0,
        backlash_rad=take("backlash", "angle", 0.0),
        base_stiffness_n_per_m=take("base_stiffness", "stiffness", 0.0),
        base_mass_kg=take("base_mass", "mass", 0.0),
        base_damping_n_s_per_m=take("base_damping", "damping", 0.0),
        off_axis_shake=take("off_axis_shake", "share", 0.0),
        wing_bending=take("wing_bending", "share", 0.0),
    )
    if world.base_stiffness_n_per_m > 0.0 and world.base_mass_kg <= 0.0:
        table.wrong("base_mass", None, "a mass above zero for a base that moves (it is missing)")
    table.finish()
    return world
