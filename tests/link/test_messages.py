"""Messages: their bytes as documented, there and back whatever they hold, and nothing but damage from noise."""

from __future__ import annotations

import math
import random
import struct

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.link import messages as ms
from drivers.link.framing import LinkDamage, Unwrapper, wrap

FIXED = settings(deadline=None, derandomize=True)  # the same cases everywhere, however slow
U8, U16, U32 = st.integers(0, 255), st.integers(0, 2**16 - 1), st.integers(0, 2**32 - 1)
SINGLES = st.floats(width=32)
TEXT = st.text(st.characters(exclude_categories=["Cs"]), max_size=60)
PLAIN = st.one_of(
    TEXT, st.integers(-(2**63), 2**63 - 1), st.booleans(), st.floats(allow_nan=False, allow_infinity=False)
)
ARGUMENTS = {
    ms.Code.DRIVE: st.tuples(SINGLES, SINGLES),
    ms.Code.HALT: st.tuples(U8, SINGLES),
    ms.Code.TAP: st.tuples(SINGLES),
    ms.Code.RELEASE: st.tuples(SINGLES),
}
COMMANDS = st.sampled_from(ms.Code).flatmap(
    lambda code: st.builds(ms.Command, U16, st.just(code), ARGUMENTS.get(code, st.just(())))
)
EVERY = {
    ms.AskHello: st.builds(ms.AskHello, U8),
    ms.Heartbeat: st.builds(ms.Heartbeat, U32),
    ms.Command: COMMANDS,
    ms.HelloText: st.builds(ms.HelloText, U8, st.binary(max_size=300)),
    ms.Rows: st.builds(ms.Rows, st.binary(max_size=300)),
    ms.Answer: st.builds(ms.Answer, U16, st.sampled_from(ms.Result), U32, U32, TEXT),
    ms.BoardNotice: st.builds(
        ms.BoardNotice, U32, TEXT, st.dictionaries(TEXT.filter(lambda key: key != "kind"), PLAIN, max_size=5)
    ),
    ms.Boot: st.builds(ms.Boot, st.sampled_from(ms.BootCause), U8),
}


def same(one: object, other: object) -> bool:
    """Equal, where NaN equals NaN and 1 is not True."""
    return repr(one) == repr(other)


def test_every_message_is_tried() -> None:
    assert set(EVERY) == set(ms.Message.__args__)


@pytest.mark.parametrize("kind", EVERY, ids=lambda kind: kind.__name__)
def test_there_and_back(kind: type) -> None:
    @FIXED
    @given(EVERY[kind])
    def there_and_back(message: ms.Message) -> None:
        (checked,) = Unwrapper().feed(wrap(ms.pack(message)))
        assert same(ms.unpack(checked), message)

    there_and_back()


def test_their_bytes_are_those_of_the_table() -> None:
    """By hand from the docstring of `drivers.link.messages`: firmware is written from it, not from Python."""
    table: dict[str, ms.Message] = {
        "01 01": ms.AskHello(),
        "02 78563412": ms.Heartbeat(0x12345678),
        "03 0201 01": ms.Command(0x0102, ms.Code.ENABLE),
        "03 ffff 02 00004041 0000003f": ms.Command(65535, ms.Code.DRIVE, (12.0, 0.5)),
        "03 0000 03 02 0000803f": ms.Command(0, ms.Code.HALT, (2, 1.0)),
        "03 0000 06 000080bf": ms.Command(0, ms.Code.TAP, (-1.0,)),
        "03 0000 0a": ms.Command(0, ms.Code.CLOSE),
        "81 01 7b7d": ms.HelloText(1, b"{}"),
        "82 aabb": ms.Rows(b"\xaa\xbb"),
        "83 0500 01 04030201 0a000000 6e6f": ms.Answer(5, ms.Result.REFUSED, 0x01020304, 10, "no"),
        "84 01000000 7b226b696e64223a226c61746368227d": ms.BoardNotice(1, "latch"),
        "85 01 03": ms.Boot(ms.BootCause.WATCHDOG),
    }
    for written, message in table.items():
        assert ms.pack(message) == bytes.fromhex(written)
        assert ms.unpack(bytes.fromhex(written)) == message


def test_counters_wrap() -> None:
    assert ms.unpack(ms.pack(ms.Heartbeat(2**32 + 5))) == ms.Heartbeat(5)
    assert ms.unpack(ms.pack(ms.Command(65536 + 7, ms.Code.LOCK))) == ms.Command(7, ms.Code.LOCK)
    assert ms.unpack(ms.pack(ms.Answer(-1, ms.Result.DONE, -1, -1))) == ms.Answer(
        65535, ms.Result.DONE, 2**32 - 1, 2**32 - 1
    )


# Arguments in single precision


@FIXED
@given(st.floats(-1e38, 1e38))
def test_a_board_is_told_the_nearest_single_precision_value_that_is_not_more(value: float) -> None:
    """Against numpy's own conversion and its `nextafter`."""
    told = ms.single(value)
    assert np.float64(np.float32(told)) == told and abs(told) <= abs(value)
    beyond = np.nextafter(np.float32(told), np.float32(math.copysign(math.inf, value)))
    assert abs(float(beyond)) > abs(value)


def test_single_precision_keeps_what_is_no_number_and_refuses_what_is_too_big() -> None:
    assert math.isnan(ms.single(math.nan)) and ms.single(-math.inf) == -math.inf
    for huge in (3.5e38, -1e300):
        with pytest.raises(OverflowError):
            ms.pack(ms.Command(1, ms.Code.TAP, (huge,)))


# What is no message


@pytest.mark.parametrize(
    "message",
    [
        b"",
        b"\x00",
        b"\x04",
        b"\x7f\x01",
        b"\x86\x00",
        b"\xff" * 20,
        b"\x01",  # too short, too long
        b"\x01\x01\x01",
        b"\x02\x00\x00\x00",
        b"\x02\x00\x00\x00\x00\x00",
        b"\x03\x00\x00",
        b"\x03\x00\x00\x00",  # no such command
        b"\x03\x00\x00\x0b",
        b"\x03\x00\x00\x01\x00",  # arguments that do not fit
        b"\x03\x00\x00\x02" + bytes(7),
        b"\x03\x00\x00\x02" + bytes(9),
        b"\x03\x00\x00\x03" + bytes(4),
        b"\x81",
        b"\x83" + bytes(10),
        b"\x83\x00\x00\x03" + bytes(8),  # no such result
        b"\x83\x00\x00\x00" + bytes(8) + b"\xff\xfe",  # no UTF-8
        b"\x84\x00\x00\x00",
        b"\x84" + bytes(4),
        b"\x84" + bytes(4) + b"latch",
        b"\x84" + bytes(4) + b"[]",
        b"\x84" + bytes(4) + b"null",
        b"\x84" + bytes(4) + b"{}",
        b"\x84" + bytes(4) + b'{"kind":5}',
        b"\x84" + bytes(4) + b'{"kind":"latch","v":NaN}',
        b"\x84" + bytes(4) + b'{"kind":"latch","v":-Infinity}',
        b"\x84" + bytes(4) + b'{"kind":"latch","v":1e999}',
        b"\x84" + bytes(4) + b'{"kind":"latch","v":' + b"9" * 400 + b"}",
        b"\x84" + bytes(4) + b'{"kind":"latch","v":' + b"9" * 5000 + b"}",
        b"\x84" + bytes(4) + b'{"kind":"latch","v":null}',
        b"\x84" + bytes(4) + b'{"kind":"latch","v":[1]}',
        b"\x84" + bytes(4) + b'{"kind":"latch","v":{"w":1}}',
        b"\x84" + bytes(4) + b'{"kind":"\\ud800"}',  # half a character: cannot be printed or stored
        b"\x84" + bytes(4) + b'{"kind":"latch","v":"\\ud800"}',
        b"\x84" + bytes(4) + b'{"kind":"latch","\\udfff":1}',
        b"\x84" + bytes(4) + b"[" * 60_000,
        b"\x84" + bytes(4) + b'{"kind":' * 9_000,
        b"\x85",
        b"\x85\x01",
        b"\x85\x01\x04",  # no such cause
        b"\x85\x01\x00\x00",
    ],
    ids=lambda message: message[:28].hex() or "empty",
)
def test_what_is_no_message_is_damage(message: bytes) -> None:
    with pytest.raises(LinkDamage, match="cannot be read"):
        ms.unpack(message)


@FIXED
@given(st.binary(max_size=80))
def test_any_bytes_are_a_message_or_damage(noise: bytes) -> None:
    try:
        message = ms.unpack(noise)
    except LinkDamage:
        return
    packed = ms.pack(message)
    # NaN payloads and the spelling of JSON may differ; what is said may not.
    assert same(ms.unpack(packed), message)


def test_noise_behind_every_first_byte() -> None:
    """100 000 messages of random bytes whose first byte is one that means something."""
    chance = random.Random(11)
    kinds = [0x01, 0x02, 0x03, 0x81, 0x82, 0x83, 0x84, 0x85]
    read = 0
    for _ in range(100_000):
        noise = bytes((chance.choice(kinds),)) + chance.randbytes(chance.randrange(24))
        try:
            ms.unpack(noise)
            read += 1
        except LinkDamage:
            pass
    assert 0 < read < 100_000


def test_a_notice_keeps_its_kind_whatever_its_data_are_called() -> None:
    told = ms.unpack(ms.pack(ms.BoardNotice(1, "latch", {"kind": "other", "cause": "stall"})))
    assert told == ms.BoardNotice(1, "latch", {"cause": "stall"})


def test_the_sizes_firmware_must_reserve() -> None:
    sizes = {name: getattr(ms, name).size for name in ("COMMAND", "HEARTBEAT", "ANSWER", "NOTICE", "BOOT")}
    assert sizes == {"COMMAND": 4, "HEARTBEAT": 5, "ANSWER": 12, "NOTICE": 5, "BOOT": 3}
    assert all(isinstance(form, struct.Struct) and form.format[0] == "<" for form in ms.ARGUMENTS.values())
