"""Benches for the tests: a boom and a column with all sensors, on a virtual clock."""

from __future__ import annotations

import math

from analysis.mechanism.parameters import Carriage, Mechanism
from drivers.channels import Channel, ChannelTable
from drivers.clock import Clock, VirtualClock
from drivers.simulated.bench import SimulatedBench
from drivers.simulated.world import BoardFacts, SensorFacts, World

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

ADC = {"low_raw": -32768, "high_raw": 32767}
CHANNELS = ChannelTable(
    (
        Channel("body", "body angle", "rad", 2.0 * math.pi / 8192),
        Channel("crank", "crank angle", "rad", 2.0 * math.pi / 2048),
        Channel("load", "vertical load", "N", 150.0 / 32768, delay_s=4e-4, **ADC),
        Channel("current", "motor current", "A", 20.0 / 32768, **ADC),
        Channel("voltage", "motor voltage", "V", 30.0 / 32768, **ADC),
        Channel("height", "carriage height", "m", 1e-6),
        Channel("air", "temperature", "degC", 0.1),
    )
)
SENSORS = {
    "body": SensorFacts(counts_per_turn=8192),
    "crank": SensorFacts(counts_per_turn=2048, index_pulse=True),
    "load": SensorFacts(noise=0.02, resonance_hz=120.0, resonance_damping=0.02),
    "current": SensorFacts(noise=0.02),
    "voltage": SensorFacts(noise=0.01),
    "height": SensorFacts(noise=1e-5),
}


def make_bench(
    mechanism: Mechanism = BOOM,
    *,
    clock: Clock | None = None,
    board: BoardFacts | None = None,
    channels: ChannelTable = CHANNELS,
    sensors: dict[str, SensorFacts] | None = None,
    **world: object,
) -> SimulatedBench:
    """A bench with a random torque given outright, so that no test depends on how it is sized."""
    settings = {"body_torque_noise_n_m_per_rt_hz": 2e-7, **world}
    return SimulatedBench(
        mechanism,
        World(**settings),  # type: ignore[arg-type]
        channels,
        SENSORS if sensors is None else sensors,
        board or BoardFacts(),
        clock or VirtualClock(),
    )
