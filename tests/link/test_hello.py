"""A board's hello: there and back, and a sentence for every lie."""

from __future__ import annotations

import copy
import json
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from simulated_rigs import CHANNELS

from drivers.channels import Channel, ChannelTable
from drivers.contract import Capabilities, Hello
from drivers.link.framing import LinkDamage, wrap
from drivers.link.hello import hello_text, read_hello
from drivers.link.messages import VERSION, HelloText, pack
from drivers.link.rowcoding import WIDTHS, RowCoding, widths_for

HELLO = Hello(
    name="bench 3",
    firmware="1.2, März",
    tick_hz=1_000_000,
    row_period_ticks=1000,
    frame_rows=20,
    channels=CHANNELS,
    capabilities=Capabilities(tapper=True, release=True, brake=False),
    heartbeat_timeout_s=0.2,
    max_voltage_v=12.1,
)
TOLD: dict[str, Any] = json.loads(hello_text(HELLO, widths_for(CHANNELS)))
JUNK: list[Any] = [None, True, "x", "", [], {}, [1], {"a": 1}, 1e999, float("nan"), 10**400, -1e300]


def without(told: dict[str, Any], path: tuple[Any, ...]) -> dict[str, Any]:
    changed = copy.deepcopy(told)
    place = changed
    for key in path[:-1]:
        place = place[key]
    del place[path[-1]]
    return changed


def changed(told: dict[str, Any], path: tuple[Any, ...], value: Any) -> dict[str, Any]:
    other = copy.deepcopy(told)
    place: Any = other
    for key in path[:-1]:
        place = place[key]
    place[path[-1]] = value
    return other


def refusal(told: object) -> str:
    text = told if isinstance(told, bytes) else json.dumps(told).encode()
    with pytest.raises(LinkDamage) as caught:
        read_hello(text)
    sentence = str(caught.value)
    assert sentence.startswith("the board's hello cannot be understood: ")
    assert len(sentence) < 250 and "\n" not in sentence and sentence.isprintable()
    return sentence


def test_there_and_back() -> None:
    for widths in (widths_for(CHANNELS), ("i32",) * len(CHANNELS)):
        assert read_hello(hello_text(HELLO, widths)) == (HELLO, widths)


def test_its_numbers_come_back_to_the_last_bit() -> None:
    odd = Channel("odd", "other", "1", scale=2.0 / 3.0 * 1e-7, offset=-1.0 / 3.0, delay_s=1e-7 / 3.0)
    hello = replace(HELLO, channels=ChannelTable((odd,)), heartbeat_timeout_s=0.1 + 0.2)
    assert read_hello(hello_text(hello, ("i32",)))[0] == hello


def test_what_a_board_does_not_tell_it_cannot_do() -> None:
    hello, _ = read_hello(json.dumps(TOLD | {"capabilities": {"tapper": True}}).encode())
    assert hello.capabilities == Capabilities(
        tapper=True, brake=False, lock=False, hardware=True, stall_trip=False, guard_input=False
    )


def test_what_hangs_on_a_wire_is_hardware_whatever_it_tells() -> None:
    hello, _ = read_hello(json.dumps(changed(TOLD, ("capabilities", "hardware"), False)).encode())
    assert hello.capabilities.hardware


def test_a_later_board_may_tell_more() -> None:
    later = changed(changed(TOLD, ("colour",), "grey"), ("capabilities", "sings"), {"notes": [1, 2]})
    later = changed(later, ("channels", 0, "maker"), [1])
    assert read_hello(json.dumps(later).encode())[0] == HELLO


# Lies

FIELDS: list[tuple[Any, ...]] = [(name,) for name in TOLD] + [
    ("channels", 2, name) for name in TOLD["channels"][2]
]


@pytest.mark.parametrize("path", FIELDS, ids=lambda path: str(path[-1]))
def test_a_missing_field_is_named(path: tuple[Any, ...]) -> None:
    assert f"{path[-1]} is missing" in refusal(without(TOLD, path))


#: What is right by chance: a text where any text will do.
ALLOWED = {"name": ["x"], "firmware": ["x"], "capabilities": [{}, {"a": 1}]}


@pytest.mark.parametrize("path", FIELDS, ids=lambda path: str(path[-1]))
def test_a_field_of_another_kind_is_refused(path: tuple[Any, ...]) -> None:
    tried = 0
    for junk in JUNK:
        if junk not in ALLOWED.get(path[-1], []):
            refusal(changed(TOLD, path, junk))
            tried += 1
    assert tried >= len(JUNK) - 2


@pytest.mark.parametrize(
    ("path", "value", "words"),
    [
        (("max_voltage_v",), 60.001, "max_voltage_v = 60.001, expected a number from 0.1 to 60"),
        (("max_voltage_v",), 0.0, "max_voltage_v"),
        (("max_voltage_v",), -12.0, "max_voltage_v"),
        (("heartbeat_timeout_s",), 0.0, "heartbeat_timeout_s"),
        (("heartbeat_timeout_s",), 11.0, "heartbeat_timeout_s"),
        (("heartbeat_timeout_s",), 0.02, "a frame lasts 0.02 s, but a heartbeat"),
        (("tick_hz",), 0, "tick_hz = 0, expected a whole number from 1 to"),
        (("tick_hz",), 10**9 + 1, "tick_hz"),
        (("tick_hz",), 1e6, "tick_hz = 1000000.0, expected a whole number"),
        (("tick_hz",), 99_999, "a frame lasts 0.200002 s"),
        (("row_period_ticks",), 0, "row_period_ticks"),
        (("row_period_ticks",), 2**31 + 1, "row_period_ticks"),
        (("row_period_ticks",), 2**31, "a frame lasts 42949.7 s"),
        (("frame_rows",), 0, "frame_rows"),
        (("frame_rows",), 256, "frame_rows"),
        (("name",), "x" * 101, "name"),
        (("name",), "two\nlines", "printable"),
        (("firmware",), "\x1b[2J", "printable"),
        (("firmware",), "\ud800", "printable"),
        (("channels",), [], "channels = [], expected a list of 1 to 255"),
        (("channels",), TOLD["channels"][:1] * 2, "two channels have the same name"),
        (("channels",), TOLD["channels"][:1] * 256, "expected a list of 1 to 255"),
        (("channels", 2, "name"), "body", "two channels have the same name"),
        (("channels", 2, "name"), "a/b", "expected letters"),
        (("channels", 2, "name"), "../x", "expected letters"),
        (("channels", 2, "measures"), "humidity", "measures 'humidity' in 'N'"),
        (("channels", 2, "unit"), "kg", "channel load measures 'vertical load' in 'kg'"),
        (("channels", 2, "scale"), 0, "channel load has a scale of 0"),
        (("channels", 2, "scale"), 1e13, "scale"),
        (("channels", 2, "offset"), -1e13, "offset"),
        (("channels", 2, "delay_s"), 1.5, "delay_s"),
        (("channels", 2, "low_raw"), 32767, "channel load reaches from 32767 to 32767"),
        (("channels", 2, "low_raw"), -(2**31) - 1, "low_raw"),
        (("channels", 2, "high_raw"), 2**31, "high_raw"),
        (("channels", 2, "width"), "f32", "channel load has a width of 'f32', expected i32, i16, u16"),
        (("channels", 2), 5, "a channel is 5, expected an object"),
        (("capabilities", "tapper"), "no", "tapper = 'no', expected true or false"),
    ],
)
def test_a_lie_is_told_in_a_sentence(path: tuple[Any, ...], value: Any, words: str) -> None:
    assert words in refusal(changed(TOLD, path, value))


def test_frames_longer_than_a_message_are_refused() -> None:
    """255 rows of 64 channels of 32 bits are 65 304 bytes with their header; the wire takes no more than that."""
    fast = TOLD | {"row_period_ticks": 10, "frame_rows": 255}
    channels = [TOLD["channels"][0] | {"name": f"c{index}"} for index in range(64)]
    assert "are too long to send" in refusal(fast | {"channels": channels})
    hello, widths = read_hello(json.dumps(fast | {"channels": channels[:63]}).encode())
    assert RowCoding(widths).frame_bytes(hello.frame_rows) < 65_000


@pytest.mark.parametrize(
    "text",
    [
        b"",
        b"{",
        b"null",
        b"5",
        b"[]",
        b'"hello"',
        b"[" * 60_000,
        b'{"channels":' * 5_000,
        b"\xff\xfe\x00",
        b"\x80",
        b"9" * 5_000,
        b'{"name":' + b"9" * 5_000 + b"}",
        json.dumps(TOLD).encode()[:-1],
    ],
    ids=lambda text: text[:16].decode("latin-1") or "empty",
)
def test_what_is_no_hello_is_told_in_a_sentence(text: bytes) -> None:
    refusal(text)


@settings(deadline=None, derandomize=True, max_examples=150)
@given(
    st.sampled_from([*FIELDS, ("capabilities", "brake"), ("channels", 3)]),
    st.recursive(
        st.one_of(st.none(), st.booleans(), st.integers(), st.floats(), st.text(max_size=200)),
        lambda inner: st.one_of(
            st.lists(inner, max_size=4), st.dictionaries(st.text(max_size=9), inner, max_size=4)
        ),
        max_leaves=9,
    ),
)
def test_any_json_in_any_place_is_read_or_refused(path: tuple[Any, ...], value: Any) -> None:
    try:
        text = json.dumps(changed(TOLD, path, value)).encode()
    except UnicodeEncodeError:
        return
    try:
        hello, widths = read_hello(text)
    except LinkDamage as damage:
        assert len(str(damage)) < 250 and "\n" not in str(damage)
        return
    assert read_hello(hello_text(hello, widths)) == (hello, widths)


def test_a_hello_of_many_channels_fits_a_message() -> None:
    channels = ChannelTable(
        tuple(
            Channel(f"channel_with_a_long_name_{index}", "vertical load", "N", 1 / 3) for index in range(255)
        )
    )
    hello = replace(HELLO, channels=channels, row_period_ticks=100, frame_rows=20)
    text = hello_text(hello, ("i32",) * 255)
    assert wrap(pack(HelloText(VERSION, text)))
    assert read_hello(text)[0] == hello


@pytest.mark.parametrize(
    ("low", "high", "width"),
    [
        (-32768, 32767, "i16"),
        (-32769, 32767, "i32"),
        (-32768, 32768, "i32"),
        (0, 65535, "u16"),
        (0, 65536, "i32"),
        (-1, 65535, "i32"),
        (0, 4095, "i16"),
        (40_000, 50_000, "u16"),
        (-(2**31), 2**31 - 1, "i32"),
    ],
)
def test_the_width_holds_the_whole_range(low: int, high: int, width: str) -> None:
    channel = Channel("one", "other", "1", 1.0, low_raw=low, high_raw=high)
    assert widths_for(ChannelTable((channel,))) == (width,)
    assert width in WIDTHS
