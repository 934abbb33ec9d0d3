"""Reading `[limits]` and `[halts]`: what the interlocks watch, and how each cause stops the motor."""

from __future__ import annotations

import math

from drivers.contract import Halt
from rig.description import DEFAULT_HALTS, ChannelDescription, Limits, StopDescription
from rig.files.table import Table
from rig.files.voltage import ABOVE_60_V, HIGHEST_V

#: Limit -> what the channel measures that must be able to show it crossed.
SEEN_BY = {"current": "motor current", "voltage": "motor voltage", "load": "vertical load"}
#: A limit slower than this would make the longest ramp take days.
SLOWEST_V_PER_S = 1e-3


def read_limits(table: Table, stops: StopDescription, channels: tuple[ChannelDescription, ...]) -> Limits:
    voltage = table.quantity("voltage", "voltage", required=True, above=0.0)
    if voltage is not None and voltage > HIGHEST_V:
        table.wrong("voltage", table.data["voltage"], ABOVE_60_V)
    low = table.quantity("travel_low", "angle", required=True)
    high = table.quantity("travel_high", "angle", required=True)
    if low is not None and stops.low_rad > -math.pi and low >= stops.low_rad:
        table.wrong("travel_low", table.data["travel_low"], "an angle beyond the lower end stop")
    if high is not None and stops.high_rad < math.pi and high <= stops.high_rad:
        table.wrong("travel_high", table.data["travel_high"], "an angle beyond the upper end stop")
    load = table.quantity("load", "force", above=0.0)
    if load is not None and not any(one.measures == "vertical load" for one in channels):
        table.wrong(
            "load", table.data["load"], "no load limit on a rig without a channel for the vertical load"
        )
    usual = Limits(0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0)

    def take(key: str, kind: str, default: float, low: float = 0.0, high: float = math.inf) -> float:
        value = table.quantity(key, kind, default, low=low, high=high)
        return default if value is None else value

    limits = Limits(
        current_a=table.quantity("current", "current", required=True, above=0.0) or 1.0,
        voltage_v=voltage or 1.0,
        winding_deg_c=table.quantity(
            "winding_temperature", "temperature", required=True, low=30.0, high=200.0
        )
        or 100.0,
        travel_low_rad=low if low is not None else -math.pi,
        travel_high_rad=high if high is not None else math.pi,
        flap_hz=table.quantity("flap_rate", "frequency", required=True, above=0.0) or 1.0,
        slew_v_per_s=table.quantity("slew", "slew", required=True, low=SLOWEST_V_PER_S) or 1.0,
        load_n=load,
        stale_s=take("stale", "time", usual.stale_s, 0.02, 2.0),
        loss_fraction=take("loss", "share", usual.loss_fraction, 0.0, 0.5),
        disk_reserve_bytes=take("disk_reserve", "data", usual.disk_reserve_bytes),
        stall_s=take("stall_time", "time", usual.stall_s, 0.05, 5.0),
        stall_v=take("stall_voltage", "voltage", usual.stall_v),
        standstill_hz=take("standstill", "frequency", usual.standstill_hz, 0.01, 5.0),
    )
    _seen(table, channels, {"current": limits.current_a, "voltage": limits.voltage_v, "load": load})
    table.finish()
    return limits


def _seen(table: Table, channels: tuple[ChannelDescription, ...], limits: dict[str, float | None]) -> None:
    """A converter that saturates below a limit would never show it crossed."""
    for key, limit in limits.items():
        if limit is None or key not in table:
            continue
        for channel in channels:
            if channel.measures != SEEN_BY[key]:
                continue
            top = min(abs(channel.low_raw), channel.high_raw) * channel.scale - abs(channel.zero)
            if limit >= top:
                words = f"a limit that channel.{channel.name} can show, below its range of {top:.4g} {channel.unit}"
                table.wrong(key, table.data[key], words)


def read_halts(table: Table) -> dict[str, Halt]:
    halts = dict(DEFAULT_HALTS)
    words = [halt.value for halt in Halt]
    for cause, usual in DEFAULT_HALTS.items():
        word = table.choice(cause, words, usual.value)
        if cause in ("voltage", "board") and word != Halt.COAST.value:
            table.wrong(
                cause, word, "coast: braking or ramping would feed an over-voltage or a faulty bridge"
            )
        halts[cause] = Halt(word)
    table.finish()
    return halts
