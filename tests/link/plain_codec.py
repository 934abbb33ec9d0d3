"""The framing a second time, byte by byte from its descriptions, to check the fast one against.

Byte stuffing: S. Cheshire and M. Baker, "Consistent Overhead Byte Stuffing", IEEE/ACM Transactions on
Networking 7 (2), 1999: a code byte n says that n - 1 bytes without a zero follow, and then a zero unless n is
255 or the packet ends. CRC: long division, bit by bit, as ITU-T V.41 and IEEE 802.3 describe it.
"""

from __future__ import annotations


def crc16(data: bytes) -> int:
    """Polynomial x^16 + x^12 + x^5 + 1, highest bit first, register full of ones, nothing inverted."""
    register = 0xFFFF
    for byte in data:
        register ^= byte << 8
        for _ in range(8):
            register = (register << 1) ^ (0x1021 if register & 0x8000 else 0)
            register &= 0xFFFF
    return register


def crc32(data: bytes) -> int:
    """The polynomial of IEEE 802.3, lowest bit first, register full of ones, inverted at the end."""
    register = 0xFFFFFFFF
    for byte in data:
        register ^= byte
        for _ in range(8):
            register = (register >> 1) ^ (0xEDB88320 if register & 1 else 0)
    return register ^ 0xFFFFFFFF


def stuff(data: bytes) -> bytes:
    """Stretches between zeros, each behind its length; the packet ends with a zero that is not sent."""
    out = bytearray()
    for stretch in data.split(b"\0"):
        rest = stretch
        while len(rest) >= 254:
            out += b"\xff" + rest[:254]
            rest = rest[254:]
        out += bytes((len(rest) + 1,)) + rest
    # A packet that ends with 254 bytes without a zero needs no code byte for what does not follow.
    last = data.rsplit(b"\0", 1)[-1]
    if last and len(last) % 254 == 0:
        out.pop()
    return bytes(out)


def unstuff(stuffed: bytes) -> bytes:
    """ValueError for what no packet is stuffed to."""
    out = bytearray()
    at = 0
    while at < len(stuffed):
        code = stuffed[at]
        stretch = stuffed[at + 1 : at + code]
        if code == 0 or 0 in stretch or len(stretch) != code - 1:
            raise ValueError(f"no stretch of {code - 1} bytes at {at}")
        out += stretch
        at += code
        if code < 255 and at < len(stuffed):
            out.append(0)
    return bytes(out)


def check(message: bytes) -> bytes:
    return bytes(divmod(crc16(message), 256)) + bytes(divmod(crc32(message) % 65536, 256))


def wire(message: bytes) -> bytes:
    """A message as the docstring of `drivers.link.framing` says it goes on the wire."""
    return stuff(message + check(message)) + b"\0"
