"""Benches for the tests: a boom and a column with all sensors, on a virtual clock."""

from __future__ import annotations

import math

from rigs import BOOM, COLUMN

from analysis.mechanism.parameters import Mechanism
from drivers.channels import Channel, ChannelTable
from drivers.clock import Clock, VirtualClock
from drivers.simulated.bench import SimulatedBench
from drivers.simulated.world import BoardFacts, SensorFacts, World

__all__ = ["BOOM", "CHANNELS", "COLUMN", "SENSORS", "make_bench"]

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
