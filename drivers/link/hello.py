"""A board's hello as JSON: who it is, its clock, its channel table with delays, what it can do.

{"name", "firmware", "tick_hz", "row_period_ticks", "frame_rows", "heartbeat_timeout_s", "max_voltage_v",
 "capabilities": {"tapper": true, ...}, "channels": [{"name", "measures", "unit", "scale", "offset",
 "delay_s", "low_raw", "high_raw", "width": "i32" | "i16" | "u16"}, ...]}
"""

from __future__ import annotations

import json
import reprlib
from collections.abc import Sequence
from dataclasses import asdict, fields
from typing import Any

from drivers.channels import MEASURED_UNITS, Channel, ChannelTable
from drivers.contract import Capabilities, Hello
from drivers.link.framing import LONGEST_MESSAGE, LinkDamage
from drivers.link.rowcoding import WIDTHS, RowCoding

#: Longest name a board or a channel may have.
NAME_CHARACTERS = 100


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
    except (ValueError, RecursionError):
        raise LinkDamage("the board's hello cannot be understood: it is no JSON") from None
    try:
        return _read(_object(told, "what it tells"))
    except ValueError as error:
        raise LinkDamage(f"the board's hello cannot be understood: {error}") from None


def _read(told: dict[str, Any]) -> tuple[Hello, tuple[str, ...]]:
    listed = _value(told, "channels")
    if not isinstance(listed, list) or not 1 <= len(listed) <= 255:
        raise ValueError(f"channels = {_short(listed)}, expected a list of 1 to 255")
    table = [_object(one, "a channel") for one in listed]
    channels = tuple(_channel(one) for one in table)
    names = [channel.name for channel in channels]
    if len(set(names)) != len(names):
        raise ValueError("two channels have the same name")
    widths = tuple(str(_value(one, "width")) for one in table)
    for name, width in zip(names, widths, strict=True):
        if width not in WIDTHS:
            raise ValueError(f"channel {name} has a width of {_short(width)}, expected {', '.join(WIDTHS)}")
    has = _object(_value(told, "capabilities"), "capabilities")
    # What a board does not tell it does not have; what hangs on a wire is hardware, whatever it tells.
    can = {one.name: has.get(one.name, False) for one in fields(Capabilities)} | {"hardware": True}
    if odd := [name for name, value in can.items() if not isinstance(value, bool)]:
        raise ValueError(f"{odd[0]} = {_short(can[odd[0]])}, expected true or false")
    hello = Hello(
        name=_text(told, "name"),
        firmware=_text(told, "firmware"),
        tick_hz=_whole(told, "tick_hz", 1, 10**9),
        row_period_ticks=_whole(told, "row_period_ticks", 1, 2**31),
        frame_rows=_whole(told, "frame_rows", 1, 255),
        channels=ChannelTable(channels),
        capabilities=Capabilities(**can),
        heartbeat_timeout_s=_number(told, "heartbeat_timeout_s", 1e-3, 10.0),
        max_voltage_v=_number(told, "max_voltage_v", 0.1, 60.0),
    )
    frame_s = hello.frame_rows * hello.row_period_ticks / hello.tick_hz
    if frame_s >= hello.heartbeat_timeout_s:
        raise ValueError(
            f"a frame lasts {frame_s:g} s, but a heartbeat, which names the newest row, "
            f"must come every {hello.heartbeat_timeout_s:g} s"
        )
    if RowCoding(widths).frame_bytes(hello.frame_rows) >= LONGEST_MESSAGE:
        raise ValueError(
            f"frames of {hello.frame_rows} rows of {len(channels)} channels are too long to send"
        )
    return hello, widths


def _channel(one: dict[str, Any]) -> Channel:
    name = _text(one, "name")
    if not name.isidentifier():
        raise ValueError(f"a channel called {_short(name)}, expected letters, digits and _")
    measures, unit = _text(one, "measures"), _text(one, "unit")
    if MEASURED_UNITS.get(measures) != unit:
        raise ValueError(f"channel {name} measures {_short(measures)} in {_short(unit)}")
    scale = _number(one, "scale", -1e12, 1e12)
    if scale == 0.0:
        raise ValueError(f"channel {name} has a scale of 0")
    low_raw = _whole(one, "low_raw", -(2**31), 2**31 - 1)
    high_raw = _whole(one, "high_raw", -(2**31), 2**31 - 1)
    if low_raw >= high_raw:
        raise ValueError(f"channel {name} reaches from {low_raw} to {high_raw}")
    return Channel(
        name=name,
        measures=measures,
        unit=unit,
        scale=scale,
        offset=_number(one, "offset", -1e12, 1e12),
        delay_s=_number(one, "delay_s", -1.0, 1.0),
        low_raw=low_raw,
        high_raw=high_raw,
    )


# One value each; what a board tells may be anything JSON can hold, at any length.


def _short(value: object) -> str:
    words = reprlib.repr(value)
    return words if len(words) <= 60 else f"{words[:57]}..."


def _object(value: object, what: str) -> dict[str, Any]:
    if not isinstance(value, dict):
        raise ValueError(f"{what} is {_short(value)}, expected an object")
    return value


def _value(told: dict[str, Any], name: str) -> Any:
    if name not in told:
        raise ValueError(f"{name} is missing")
    return told[name]


def _text(told: dict[str, Any], name: str) -> str:
    value = _value(told, name)
    if not isinstance(value, str) or not value.isprintable() or not 1 <= len(value) <= NAME_CHARACTERS:
        raise ValueError(f"{name} = {_short(value)}, expected 1 to {NAME_CHARACTERS} printable characters")
    return value


def _number(told: dict[str, Any], name: str, low: float, high: float) -> float:
    value = _value(told, name)
    # The comparison comes first: a whole number of 400 digits cannot be asked whether it is finite.
    if isinstance(value, bool) or not isinstance(value, int | float) or not low <= value <= high:
        raise ValueError(f"{name} = {_short(value)}, expected a number from {low:g} to {high:g}")
    return float(value)


def _whole(told: dict[str, Any], name: str, low: int, high: int) -> int:
    value = _value(told, name)
    if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
        raise ValueError(f"{name} = {_short(value)}, expected a whole number from {low} to {high}")
    return value
