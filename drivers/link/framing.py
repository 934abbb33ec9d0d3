"""Messages in a stream of bytes: two check sums, byte stuffing, a zero between messages.

    on the wire:  stuffed(message + check) 00
    check:        CRC-16 of the message (polynomial 0x1021, start 0xFFFF), big-endian,
                  then the low half of its CRC-32 (as in IEEE 802.3), big-endian

Byte stuffing is COBS (Cheshire and Baker, IEEE/ACM Transactions on Networking 7, 1999): a message costs one
byte in 254 and never holds a zero, so a reader that comes late or meets damage finds the next message at the
next zero. One 16-bit check alone lets one damaged message in 65 536 pass; on a noisy line at 50 messages a
second that is a wrong row, or a wrong drive voltage, every few hours. Two with different polynomials let one
in four thousand million pass.
"""

from __future__ import annotations

import struct
from binascii import crc32, crc_hqx

from cobs import cobs

#: No message is longer on the wire, its zero not counted; what is longer is noise.
LONGEST = 1 << 16
CHECK = struct.Struct(">I")
#: A message of so many bytes fits whatever they are.
LONGEST_MESSAGE = LONGEST - (LONGEST // 254 + 1) - CHECK.size


class LinkDamage(ValueError):
    """Bytes that are no message. The only exception the codec raises for bytes from outside."""


def check_of(message: bytes) -> bytes:
    return CHECK.pack(crc_hqx(message, 0xFFFF) << 16 | crc32(message) & 0xFFFF)


def wrap(message: bytes) -> bytes:
    """A message as it goes on the wire. ValueError for one that no reader would take: empty or too long."""
    stuffed = cobs.encode(message + check_of(message))
    if not message or len(stuffed) > LONGEST:
        raise ValueError(f"a message of {len(message)} bytes, expected 1 to {LONGEST_MESSAGE}")
    return stuffed + b"\0"


class Unwrapper:
    """Finds the messages in a stream of bytes, however it is cut; counts what is none."""

    def __init__(self) -> None:
        self.damaged = 0  # stretches between two zeros that were no message
        self._rest = b""
        self._overlong = False

    def feed(self, data: bytes) -> list[bytes]:
        """The messages completed by `data`, checked, without their check; damaged ones are counted."""
        pieces = (self._rest + data if self._rest else data).split(b"\0")
        self._rest = pieces.pop()
        if self._overlong and pieces:  # the end of a stretch whose beginning was thrown away
            self._overlong = False
            del pieces[0]
        messages = []
        decode, written = cobs.decode, CHECK.unpack_from
        for piece in pieces:
            if not piece:
                continue
            try:
                checked = decode(piece) if len(piece) <= LONGEST else b""
            except cobs.DecodeError:
                checked = b""
            message = checked[: -CHECK.size]
            # Written out, not called: this runs for every message there is.
            if message and written(checked, len(message))[0] == (
                crc_hqx(message, 0xFFFF) << 16 | crc32(message) & 0xFFFF
            ):
                messages.append(message)
            else:
                self.damaged += 1
        if len(self._rest) > LONGEST:
            self._rest = b""
            if not self._overlong:
                self.damaged += 1
            self._overlong = True
        return messages

    def forget(self) -> None:
        """Drop what has come so far, counts included: a new connection."""
        self.damaged = 0
        self._rest = b""
        self._overlong = False
