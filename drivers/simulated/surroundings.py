"""From the world around a simulated bench to the plant that stands in it."""

from __future__ import annotations

import math
from collections.abc import Mapping

from analysis.mechanism import equations as eq
from analysis.mechanism.ambient import noise_density_for_rms
from analysis.mechanism.disturbance import Disturbance
from analysis.mechanism.parameters import Carriage, Mechanism
from analysis.mechanism.plant import Plant
from drivers.channels import ChannelTable
from drivers.simulated.world import SensorFacts, World

#: A crank with its weight at the bottom: where it comes to rest by itself.
CRANK_AT_REST_RAD = -0.5 * math.pi


def disturbance_of(
    mechanism: Mechanism, world: World, channels: ChannelTable, sensors: Mapping[str, SensorFacts]
) -> Disturbance:
    """Random torque, sticking, play and the load cell's resonance in the plant's own terms."""
    density = world.body_torque_noise_n_m_per_rt_hz
    if density is None:
        rms_rad = world.body_torque_rms_rad
        density = noise_density_for_rms(mechanism, rms_rad) if rms_rad > 0.0 else 0.0
    column = channels.measuring("vertical load")
    cell = SensorFacts() if column is None else sensors.get(channels[column].name, SensorFacts())
    return Disturbance(
        seed=world.seed,
        torque_noise_n_m_per_rt_hz=density,
        hinge_sticking_n_m=world.hinge_sticking_n_m,
        backlash_rad=world.backlash_rad,
        base_mass_kg=world.base_mass_kg,
        base_stiffness_n_per_m=world.base_stiffness_n_per_m,
        base_damping_n_s_per_m=world.base_damping_n_s_per_m,
        off_axis_shake=world.off_axis_shake,
        wing_bending=world.wing_bending,
        ambient_deg_c=world.ambient_deg_c,
        load_cell_hz=cell.resonance_hz,
        load_cell_damping=cell.resonance_damping,
    )


def plant_at_rest(mechanism: Mechanism, disturbance: Disturbance, world: World, row_s: float) -> Plant:
    """The mechanism as it stands before a run: body on its lower end stop, crank at the bottom."""
    plant = Plant(mechanism, disturbance, row_s=row_s, winding_deg_c=world.winding_start_deg_c)
    hangs = mechanism.shuttle_mass_kg > 0.0 or (
        mechanism.carriage is Carriage.GEARED and not mechanism.weight_preloaded
    )
    if hangs:
        record = plant.record
        record[eq.CRANK] = CRANK_AT_REST_RAD
        record[eq.SWEEP] = mechanism.wing_stroke_rad * math.sin(CRANK_AT_REST_RAD)
        if mechanism.carriage is Carriage.GEARED:
            record[eq.HEIGHT] = mechanism.shake_amplitude_m * math.sin(CRANK_AT_REST_RAD)
    return plant
