"""The messages between host and board, little-endian; the first byte tells which.

    host to board
      01 ask hello    u8 version                      the board answers and begins to send rows
      02 heartbeat    u32 tick                        of the newest row that passed the interlocks
      03 command      u16 number, u8 code, arguments  answered once; the same number again is not done again
    board to host
      81 hello        u8 version, UTF-8 JSON          (`drivers.link.hello`)
      82 rows         a row frame                     (`drivers.link.rowcoding`)
      83 answer       u16 number, u8 result, u32 tick, u32 value, UTF-8 reason
      84 notice       u32 tick, UTF-8 JSON with "kind"
      85 boot         u8 version, u8 cause            sent once when the board has started

A heartbeat that names no newer row than the one before does not feed the watchdog: a host that hangs in a
loop cannot keep a motor on.
"""

from __future__ import annotations

import enum
import json
import math
import struct
from dataclasses import dataclass, field

from drivers.link.framing import LinkDamage

VERSION = 1
ROWS = 0x82


class Code(enum.IntEnum):
    """Commands; arguments are IEEE 754 single precision, SI units."""

    ENABLE = 1
    DRIVE = 2  # f32 V, f32 V/s
    HALT = 3  # u8 way (0 coast, 1 brake, 2 ramp), f32 V/s
    LOCK = 4
    UNLOCK = 5
    TAP = 6  # f32 N m s
    SYNC = 7
    RELEASE = 8  # f32 rad
    CLEAR_LATCH = 9
    CLOSE = 10  # drive off, no more rows


class Result(enum.IntEnum):
    DONE = 0
    REFUSED = 1
    LACKING = 2  # the board has no such part


class BootCause(enum.IntEnum):
    POWER = 0
    RESET = 1
    BROWN_OUT = 2
    WATCHDOG = 3


#: Arguments of each command.
ARGUMENTS = {
    Code.DRIVE: struct.Struct("<ff"),
    Code.HALT: struct.Struct("<Bf"),
    Code.TAP: struct.Struct("<f"),
    Code.RELEASE: struct.Struct("<f"),
}
NO_ARGUMENTS = struct.Struct("")
COMMAND = struct.Struct("<BHB")
HEARTBEAT = struct.Struct("<BI")
ANSWER = struct.Struct("<BHBII")
NOTICE = struct.Struct("<BI")
TWO_BYTES = struct.Struct("<BB")
SINGLE = struct.Struct("<f")
SINGLE_BITS = struct.Struct("<I")
BOOT = struct.Struct("<BBB")


@dataclass(frozen=True)
class AskHello:
    version: int = VERSION


@dataclass(frozen=True)
class Heartbeat:
    tick: int


@dataclass(frozen=True)
class Command:
    number: int
    code: Code
    arguments: tuple[float, ...] = ()


@dataclass(frozen=True)
class HelloText:
    version: int
    text: bytes


@dataclass(frozen=True)
class Rows:
    payload: bytes


@dataclass(frozen=True)
class Answer:
    number: int
    result: Result
    tick: int
    value: int = 0
    reason: str = ""


@dataclass(frozen=True)
class BoardNotice:
    tick: int
    kind: str
    data: dict[str, object] = field(default_factory=dict)


@dataclass(frozen=True)
class Boot:
    cause: BootCause
    version: int = VERSION


Message = AskHello | Heartbeat | Command | HelloText | Rows | Answer | BoardNotice | Boot


def single(value: float) -> float:
    """`value` in single precision, rounded towards zero: a board is never told more than was asked for.

    Rounded to the nearest, a board's own highest voltage (12.1 V, say) would be refused by it as too high.
    OverflowError for what single precision cannot hold.
    """
    (told,) = SINGLE.unpack(SINGLE.pack(value))
    if abs(told) > abs(value):
        (bits,) = SINGLE_BITS.unpack(SINGLE.pack(told))
        (told,) = SINGLE.unpack(SINGLE_BITS.pack(bits - 1))  # sign and magnitude: one less is nearer to zero
    return float(told)


def pack(message: Message) -> bytes:
    """A message as bytes, to be wrapped. OverflowError for an argument that single precision cannot hold."""
    match message:
        case AskHello(version):
            return TWO_BYTES.pack(0x01, version)
        case Heartbeat(tick):
            return HEARTBEAT.pack(0x02, tick & 0xFFFFFFFF)
        case Command(number, code, arguments):
            form = ARGUMENTS.get(code, NO_ARGUMENTS)
            told = [single(one) if isinstance(one, float) else one for one in arguments]
            return COMMAND.pack(0x03, number & 0xFFFF, code) + form.pack(*told)
        case HelloText(version, text):
            return TWO_BYTES.pack(0x81, version) + text
        case Rows(payload):
            return bytes((ROWS,)) + payload
        case Answer(number, result, tick, value, reason):
            head = ANSWER.pack(0x83, number & 0xFFFF, result, tick & 0xFFFFFFFF, value & 0xFFFFFFFF)
            return head + reason.encode()
        case BoardNotice(tick, kind, data):
            fields = json.dumps({**data, "kind": kind}, separators=(",", ":"))
            return NOTICE.pack(0x84, tick & 0xFFFFFFFF) + fields.encode()
        case Boot(cause, version):
            return BOOT.pack(0x85, version, cause)


def unpack(message: bytes) -> Message:
    """A message from checked bytes. LinkDamage if they are none of this version's."""
    try:
        return _unpack(message)
    except (struct.error, ValueError, IndexError, KeyError, RecursionError) as error:
        raise LinkDamage(f"a message of kind {message[:1].hex() or 'none'} cannot be read") from error


def _unpack(message: bytes) -> Message:
    match message[0]:
        case 0x01:
            return AskHello(TWO_BYTES.unpack(message)[1])
        case 0x02:
            return Heartbeat(HEARTBEAT.unpack(message)[1])
        case 0x03:
            _, number, code = COMMAND.unpack_from(message)
            form = ARGUMENTS.get(Code(code), NO_ARGUMENTS)
            return Command(number, Code(code), form.unpack(message[COMMAND.size :]))
        case 0x81:
            return HelloText(message[1], message[2:])
        case 0x82:
            return Rows(message[1:])
        case 0x83:
            _, number, result, tick, value = ANSWER.unpack_from(message)
            return Answer(number, Result(result), tick, value, message[ANSWER.size :].decode())
        case 0x84:
            (_, tick) = NOTICE.unpack_from(message)
            fields = json.loads(message[NOTICE.size :], parse_constant=_no_constant)
            if not isinstance(fields, dict):
                raise ValueError("a notice is a JSON object")
            kind = fields.pop("kind")
            if not isinstance(kind, str) or not all(map(_plain, (kind, *fields, *fields.values()))):
                raise ValueError("a notice holds texts and numbers")
            return BoardNotice(tick, kind, fields)
        case 0x85:
            _, version, cause = BOOT.unpack(message)
            return Boot(BootCause(cause), version)
    raise ValueError("no such message")


def _no_constant(name: str) -> float:
    raise ValueError(f"{name} is no JSON number")


def _plain(value: object) -> bool:
    """Whether a value can be written down anywhere: finite, of 64 bits, without half characters."""
    if isinstance(value, str):
        value.encode()  # UnicodeEncodeError, a ValueError, for a lone surrogate
        return True
    if isinstance(value, float):
        return math.isfinite(value)
    return isinstance(value, int) and -(2**63) <= value < 2**63
