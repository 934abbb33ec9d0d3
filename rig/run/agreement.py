"""Whether a board is the one a rig file describes, told before anything is powered."""

from __future__ import annotations

import math
from dataclasses import replace

from drivers.channels import Channel, ChannelTable
from drivers.contract import Hello
from drivers.errors import BenchMisuse
from rig.bench_source import channel_of
from rig.description import RigDescription

#: A converter's scale differs from its nominal value by calibration, never by this much.
SCALE_FACTOR = 1.5

#: What a stand-in's board puts behind the name of the rig it stands in for.
STAND_IN = "(stand-in)"

#: A watchdog of 200 ms is what is asked for; one far slower is none.
LONGEST_WATCHDOG_S = 0.5


def agreed(rig: RigDescription, hello: Hello) -> Hello:
    """The hello with the rig's own scales, zeros and ranges in the board's order of channels.

    The board says what it samples, the rig file how it was calibrated. BenchMisuse, naming what differs, if the
    two cannot be the same bench.
    """
    described = {one.name: one for one in rig.channels}
    missing = [name for name in described if name not in [channel.name for channel in hello.channels]]
    if missing:
        raise BenchMisuse(
            f"{rig.name} describes a channel {missing[0]!r}, which the board {hello.name!r} does not send"
        )
    row_hz = hello.tick_hz / hello.row_period_ticks
    if abs(row_hz - rig.sample_hz) > 1e-6 * rig.sample_hz:
        raise BenchMisuse(f"{rig.name} says {rig.sample_hz:g} rows a second, the board sends {row_hz:g}")
    if hello.frame_rows / row_hz > 0.5 * rig.limits.stale_s:
        raise BenchMisuse(
            f"a frame of the board takes {1e3 * hello.frame_rows / row_hz:.0f} ms, more than half of "
            f"limits.stale = {1e3 * rig.limits.stale_s:.0f} ms"
        )
    if hello.heartbeat_timeout_s > LONGEST_WATCHDOG_S:
        raise BenchMisuse(
            f"the board waits {hello.heartbeat_timeout_s:g} s for a heartbeat before it acts, more than "
            f"{LONGEST_WATCHDOG_S:g} s"
        )
    channels = tuple(
        _agreed(channel, channel_of(described[channel.name]), hello.name)
        if channel.name in described
        else channel
        for channel in hello.channels
    )
    return replace(hello, channels=ChannelTable(channels))


def named_otherwise(rig: RigDescription, hello: Hello) -> str:
    """A sentence if a board calls itself by another name than the rig file; "" if not, also for its stand-in.

    Channel tables of different rigs may be alike, so that nothing but the name tells them apart. Nobody has to name a
    board like its rig: that is a notice and no refusal.
    """
    if _bare(hello.name) == _bare(rig.name):
        return ""
    return f"the board calls itself {hello.name!r}, the rig file is for {rig.name!r}"


def _bare(name: str) -> str:
    return name.strip().casefold().removesuffix(STAND_IN).rstrip()


def _agreed(board: Channel, rig: Channel, board_name: str) -> Channel:
    if board.measures != rig.measures:
        raise BenchMisuse(
            f"channel {rig.name!r} is a {rig.measures} in the rig file and a {board.measures} on {board_name!r}"
        )
    ratio = abs(rig.scale / board.scale)
    encoder = rig.measures in ("body angle", "crank angle")
    if not (math.isclose(ratio, 1.0, rel_tol=1e-6) if encoder else 1 / SCALE_FACTOR < ratio < SCALE_FACTOR):
        raise BenchMisuse(
            f"channel {rig.name!r} has {abs(rig.scale):.6g} {rig.unit} a count in the rig file and "
            f"{abs(board.scale):.6g} on {board_name!r}"
        )
    return replace(rig, delay_s=rig.delay_s or board.delay_s)
