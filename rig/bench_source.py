"""From a rig description to the bench it describes."""

from __future__ import annotations

import math
from dataclasses import asdict

from drivers.channels import Channel, ChannelTable
from drivers.clock import Clock
from drivers.contract import Bench
from drivers.errors import BenchMisuse
from rig.description import ChannelDescription, RigDescription


def channel_of(described: ChannelDescription) -> Channel:
    """The channel a description asks for: value = polarity x raw x scale - zero, in SI units."""
    scale = described.scale
    if described.counts_per_turn:
        scale = 2.0 * math.pi / described.counts_per_turn
    return Channel(
        name=described.name,
        measures=described.measures,
        unit=described.unit,
        scale=described.polarity * scale,
        offset=-described.zero,
        delay_s=described.delay_s,
        low_raw=described.low_raw,
        high_raw=described.high_raw,
    )


def channel_table(rig: RigDescription) -> ChannelTable:
    return ChannelTable(tuple(channel_of(described) for described in rig.channels))


def bench_for(rig: RigDescription, clock: Clock, *, watchdog_s: float = 0.2) -> Bench:
    """The rig's bench, not yet opened; compiles its kernels now, never during a run.

    `watchdog_s` is that of a simulated board; a real one brings its own.

    BenchMisuse if the rig names no driver known here or cannot be simulated.
    """
    if rig.driver == "none":
        raise BenchMisuse(f"{rig.name} has no driver: it is described for analysis only")
    if rig.driver == "board":
        from drivers.board import BoardBench
        from drivers.ports import open_wire

        return BoardBench(lambda: open_wire(rig.port, rig.baud), clock)
    if rig.driver != "simulated":
        raise BenchMisuse(f"no driver is called {rig.driver!r}; this version knows 'simulated' and 'board'")
    if rig.mechanism is None:
        raise BenchMisuse(f"{rig.name} gives no constants of a mechanism, so it cannot be simulated")
    # Late: the numeric kernels take time to load, and most commands need no bench.
    from drivers.simulated.bench import SimulatedBench
    from drivers.simulated.world import BoardFacts, SensorFacts, World

    limits = rig.limits
    facts = {
        described.name: SensorFacts(
            noise=described.noise,
            counts_per_turn=described.counts_per_turn,
            index_pulse=described.index_pulse,
            resonance_hz=described.resonance_hz,
            resonance_damping=described.resonance_damping,
        )
        for described in rig.channels
    }
    board = BoardFacts(
        row_hz=rig.sample_hz,
        frame_rows=rig.frame_rows,
        tick_hz=rig.tick_hz,
        heartbeat_timeout_s=watchdog_s,
        stall_v=limits.stall_v,
        stall_s=limits.stall_s,
        standstill_hz=limits.standstill_hz,
        tapper=rig.tapper,
        sync=rig.sync_line,
        releaser=rig.releaser,
    )
    world = World() if rig.world is None else World(**asdict(rig.world))
    return SimulatedBench(rig.mechanism, world, channel_table(rig), facts, board, clock, rig.name)
