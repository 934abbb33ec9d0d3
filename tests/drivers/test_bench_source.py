"""From a rig description to its bench."""

from __future__ import annotations

import math
from dataclasses import fields, replace

import pytest
from conformance import Owner
from simulated_rigs import BOOM

from drivers.clock import VirtualClock
from drivers.errors import BenchMisuse
from drivers.simulated.world import World
from rig.bench_source import bench_for, channel_table
from rig.description import (
    DEFAULT_HALTS,
    ChannelDescription,
    Limits,
    RigDescription,
    SimulatedWorld,
    StopDescription,
)

RIG = RigDescription(
    name="test boom",
    title="",
    driver="simulated",
    sample_hz=2000.0,
    frame_rows=40,
    tick_hz=2_000_000,
    channels=(
        ChannelDescription("body", "body angle", "rad", 0.0, zero=0.2, polarity=-1, counts_per_turn=8192),
        ChannelDescription("crank", "crank angle", "rad", 0.0, counts_per_turn=2048, index_pulse=True),
        ChannelDescription("volts", "motor voltage", "V", 0.001, zero=0.5, noise=0.002, delay_s=1e-4),
    ),
    limits=Limits(
        current_a=6.0,
        voltage_v=12.5,
        winding_deg_c=90.0,
        travel_low_rad=-0.2,
        travel_high_rad=0.7,
        flap_hz=50.0,
        slew_v_per_s=2.0,
        stall_s=0.3,
        stall_v=1.0,
    ),
    halts=DEFAULT_HALTS,
    motor=None,
    stops=StopDescription(BOOM.stop_low_rad, BOOM.stop_high_rad),
    mechanism=BOOM,
    world=SimulatedWorld(body_torque_noise_n_m_per_rt_hz=1e-7),
    releaser=False,
)


def test_the_bench_measures_as_the_rig_describes() -> None:
    bench = bench_for(RIG, VirtualClock())
    hello = bench.open()
    assert (hello.tick_hz, hello.row_period_ticks, hello.frame_rows) == (2_000_000, 1000, 40)
    assert hello.name == "test boom"
    assert hello.capabilities.tapper and not hello.capabilities.release and not hello.capabilities.hardware
    assert hello.channels == channel_table(RIG)
    owner = Owner(bench, hello)
    bench.enable()
    bench.drive(1.0, 10.0)
    blocks = owner.run(0.5)
    _, volts = owner.values("motor voltage", blocks)
    assert volts[-100:].mean() == pytest.approx(1.0, abs=0.002)
    # value = polarity x raw x scale - zero
    raw = blocks[-1].raw[-1]
    assert raw[2] * 0.001 - 0.5 == pytest.approx(1.0, abs=0.01)
    body_rad = -raw[0] * 2.0 * math.pi / 8192 - 0.2
    assert body_rad == pytest.approx(math.radians(-4.0), abs=0.002)


def test_the_rigs_stall_limits_are_the_boards() -> None:
    bench = bench_for(replace(RIG, mechanism=BOOM.with_(motor_coulomb_n_m=0.5)), VirtualClock())
    owner = Owner(bench, bench.open())
    bench.enable()
    tick = bench.drive(1.2, 20.0)
    owner.run(1.0)
    notices = [notice for notice in owner.notices if notice.kind == "latch"]
    assert [notice.data for notice in notices] == [{"cause": "stall"}]
    assert 0.3 <= (notices[0].tick - tick) / 2e6 <= 0.45


def test_every_fact_of_the_world_reaches_the_bench() -> None:
    ours = {field.name: field.default for field in fields(World)}
    theirs = {field.name: field.default for field in fields(SimulatedWorld)}
    assert ours == theirs


def test_a_rig_that_cannot_be_simulated_is_refused() -> None:
    with pytest.raises(BenchMisuse, match="no constants"):
        bench_for(replace(RIG, mechanism=None), VirtualClock())
    with pytest.raises(BenchMisuse, match="no driver"):
        bench_for(replace(RIG, driver="telepathy"), VirtualClock())
