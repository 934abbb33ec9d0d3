"""Reading `[channel.NAME]` tables."""

from __future__ import annotations

import math

from drivers.channels import MEASURED_UNITS
from rig.description import ChannelDescription
from rig.files.table import Table

#: Kind of quantity of a channel's scale, zero and noise, by what it measures.
KINDS = {
    "body angle": "angle",
    "crank angle": "angle",
    "vertical load": "force",
    "motor current": "current",
    "motor voltage": "voltage",
    "carriage height": "length",
    "temperature": "temperature",
}
ENCODERS = ("body angle", "crank angle", "carriage height")
NAMES_TAKEN = ("tick", "time_s", "status")


def read_channels(table: Table) -> tuple[ChannelDescription, ...]:
    """All channels in the order of the file."""
    channels = []
    seen: dict[str, str] = {}
    for name in table.data:
        one = table.table(name)
        if one is None:
            continue
        channel = _channel(name, one)
        if channel is None:
            continue
        if name in NAMES_TAKEN or not name.isidentifier():  # which a session file asks for
            words = (
                "a channel name of letters, digits and _, beginning with a letter, not tick, time_s or status"
            )
            one.wrong("", name, words)
        if channel.measures in seen:
            one.wrong(
                "measures", channel.measures, f"one channel for it; {seen[channel.measures]} measures it"
            )
        seen[channel.measures] = name
        channels.append(channel)
    return tuple(channels)


def _channel(name: str, table: Table) -> ChannelDescription | None:
    measures = table.choice("measures", tuple(KINDS), "", required=True)
    if not measures:
        return None
    kind = KINDS[measures]
    counts, scale = 0, 0.0
    low_raw, high_raw = -(2**31), 2**31 - 1
    if kind == "angle":
        counts = table.integer("counts_per_turn", 0, 16, 10_000_000, required=True)
        scale = 2.0 * math.pi / counts if counts else 1.0
    elif "bits" in table:
        bits = table.integer("bits", 16, 8, 24)
        span = table.quantity("range", kind, required=True, above=0.0)
        high_raw = 2 ** (bits - 1) - 1
        low_raw = -high_raw - 1
        scale = (span or 1.0) / 2 ** (bits - 1)
    else:
        scale = table.quantity("per_count", kind, required=True, above=0.0) or 1.0
    polarity = table.integer("polarity", 1, -1, 1)
    if polarity == 0:
        table.wrong("polarity", 0, "1 or -1")
        polarity = 1
    channel = ChannelDescription(
        name=name,
        measures=measures,
        unit=MEASURED_UNITS[measures],
        scale=scale,
        zero=table.quantity("zero", kind, 0.0) or 0.0,
        polarity=polarity,
        counts_per_turn=counts,
        index_pulse=table.flag("index_pulse", False),
        delay_s=table.quantity("delay", "time", 0.0, low=0.0, high=0.05) or 0.0,
        low_raw=low_raw,
        high_raw=high_raw,
        noise=table.quantity("noise", kind, 0.0, low=0.0) or 0.0,
        resonance_hz=table.quantity("resonance", "frequency", 0.0, low=0.0) or 0.0,
        resonance_damping=table.number("resonance_damping", 0.0, 0.0, 2.0),
    )
    table.finish()
    return channel
