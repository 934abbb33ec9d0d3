"""A board's hello as JSON: who it is, its clock, its channel table with delays, what it can do.

{"name", "firmware", "tick_hz", "row_period_ticks", "frame_rows", "heartbeat_timeout_s", "max_voltage_v",
 "capabilities": {"tapper": true, ...}, "channels": [{"name", "measures", "unit", "scale", "offset",
 "delay_s", "low_raw", "high_raw", "width": "i32" | "i16" | "u16"}, ...]}
"""

from __future__ import annotations

import json
import math
from collections.abc import Sequence
from dataclasses import asdict, fields
from typing import Any

from drivers.channels import MEASURED_UNITS, Channel, ChannelTable
from drivers.contract import Capabilities, Hello
from drivers.link.framing import LinkDamage
from drivers.link.rowcoding import WIDTHS


def hello_text(hello: Hello, widths: Sequence[str]) -> bytes:
    told: dict[str, Any] = {
        name: getattr(hello, name)
        for name in ("name", "firmware", "tick_hz", "row_period_ticks", "frame_rows", "heartbeat_timeout_s")
    }
    told["max_voltage_v"] = hello.max_voltage_v
    told["capabilities"] = asdict(hello.capabilities)
    told["channels"] = [
        {name: value for name, value in asdict(channel).items() if name != "calibration"} | {"width": width}
        for channel, width in zip(hello.channels, widths, strict=True)
    ]
    return json.dumps(told, separators=(",", ":")).encode()


def read_hello(text: bytes) -> tuple[Hello, tuple[str, ...]]:
    """The hello and the sample width of each channel. LinkDamage, with what is wrong, if it makes no sense."""
    try:
        told = json.loads(text)
        return _read(told)
    except (ValueError, KeyError, TypeError, RecursionError) as error:
        raise LinkDamage(f"the board's hello cannot be understood: {error}") from error


def _read(told: dict[str, Any]) -> tuple[Hello, tuple[str, ...]]:
    channels, widths = [], []
    for one in told["channels"]:
        width = str(one["width"])
        if width not in WIDTHS:
            raise ValueError(f"width {width!r} of channel {one['name']!r}")
        widths.append(width)
        channels.append(_channel(one))
    names = [channel.name for channel in channels]
    if not names or len(set(names)) != len(names) or len(names) > 255:
        raise ValueError(f"channels {names}")
    known = {one.name for one in fields(Capabilities)}
    capabilities = {name: bool(has) for name, has in dict(told["capabilities"]).items() if name in known}
    hello = Hello(
        name=str(told["name"]),
        firmware=str(told["firmware"]),
        tick_hz=_whole(told, "tick_hz", 1, 10**9),
        row_period_ticks=_whole(told, "row_period_ticks", 1, 2**31),
        frame_rows=_whole(told, "frame_rows", 1, 255),
        channels=ChannelTable(tuple(channels)),
        capabilities=Capabilities(**capabilities),
        heartbeat_timeout_s=_number(told, "heartbeat_timeout_s", 1e-3, 10.0),
        max_voltage_v=_number(told, "max_voltage_v", 0.0, 60.0),
    )
    return hello, tuple(widths)


def _channel(one: dict[str, Any]) -> Channel:
    measures = str(one["measures"])
    if MEASURED_UNITS.get(measures) != one["unit"]:
        raise ValueError(f"channel {one['name']!r} measures {measures!r} in {one['unit']!r}")
    name = str(one["name"])
    if not name.isidentifier():
        raise ValueError(f"a channel called {name!r}")
    scale = _number(one, "scale", -1e12, 1e12)
    if scale == 0.0:
        raise ValueError(f"channel {name!r} has a scale of 0")
    return Channel(
        name=name,
        measures=measures,
        unit=str(one["unit"]),
        scale=scale,
        offset=_number(one, "offset", -1e12, 1e12),
        delay_s=_number(one, "delay_s", -1.0, 1.0),
        low_raw=_whole(one, "low_raw", -(2**31), 2**31 - 1),
        high_raw=_whole(one, "high_raw", -(2**31), 2**31 - 1),
    )


def _number(told: dict[str, Any], name: str, low: float, high: float) -> float:
    value = told[name]
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise ValueError(f"{name} = {value!r}")
    if not low <= value <= high:
        raise ValueError(f"{name} = {value!r}, outside {low:g} to {high:g}")
    return float(value)


def _whole(told: dict[str, Any], name: str, low: int, high: int) -> int:
    value = told[name]
    if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
        raise ValueError(f"{name} = {value!r}, expected a whole number from {low} to {high}")
    return value
