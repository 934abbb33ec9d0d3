"""The records of a journal: every frame and event of a run, appended as it comes, readable after any crash.

Byte by byte (little-endian):

    magic    8 bytes   b"HLTRJNL\\x01"        the last byte is the format version
    records, one after the other:
      type      u8     1 header, 2 row frame, 3 event, 4 result, 5 losses, 6 end, 7 samples
      length    u32    of the payload
      sequence  u32    0, 1, 2, ... without a gap
      payload   `length` bytes
      crc       u32    CRC-32 (as in IEEE 802.3) of type, length, sequence and payload

The first record is the header: JSON with rig, protocol and calibration texts, the channel table, tick rate,
software versions and the date. A row frame's payload is the frame as the bench sent it (`drivers.rows`).
Losses precede the frame they were found before: {"rows", "frames", "overruns"}. Events and results are JSON.
Samples are rows of a sampler of text lines that arrived together (`rig.record.samples`): JSON {"sampler": its name,
"arrival_tick": the board tick estimated at arrival, "rows": [[numbers as they stood there], ...], "damaged": lines
that were none, "ticks": [of the device, one a row], only if it sends any}; the header describes their columns.
The end record closes a complete journal; one without it is an orphan, to be sealed by `haltere recover`.

Whoever follows a journal that grows stops at the first byte that is not as it must be. Of one that is at rest, what
stands behind a damage is looked for (`rig.record.resumption`): a record is taken again only if all about it fits, so
that no wrong row ever comes out.
"""

from __future__ import annotations

import json
import struct
import zlib
from dataclasses import dataclass
from typing import Any

MAGIC = b"HLTRJNL\x01"
HEAD = struct.Struct("<BII")
CRC = struct.Struct("<I")
LONGEST = 64 * 2**20  # no record is longer; a length beyond is damage

HEADER, FRAME, EVENT, RESULT, LOSSES, END, SAMPLES = 1, 2, 3, 4, 5, 6, 7


def encode(kind: int, sequence: int, payload: bytes) -> bytes:
    """One record as it stands in the file."""
    head = HEAD.pack(kind, len(payload), sequence)
    return b"".join((head, payload, CRC.pack(zlib.crc32(payload, zlib.crc32(head)))))


def to_json(fields: dict[str, Any]) -> bytes:
    return json.dumps(fields, separators=(",", ":"), allow_nan=False, default=str).encode()


@dataclass(frozen=True)
class Record:
    """One intact record."""

    kind: int
    sequence: int
    payload: bytes
    end: int  # offset of the byte after it

    @property
    def start(self) -> int:
        """Offset of its first byte."""
        return self.end - HEAD.size - len(self.payload) - CRC.size

    def fields(self) -> dict[str, Any]:
        """The payload of a JSON record; ValueError if it is no JSON object."""
        try:
            found = json.loads(self.payload)
        except RecursionError:
            raise ValueError("nested too deep") from None
        if not isinstance(found, dict):
            raise ValueError("not a JSON object")
        return found


class RecordStream:
    """Intact records out of bytes as they come, whatever pieces they come in; knows nothing of files.

    The bytes are those after the magic. Nothing after a damage is believed: `damage` then says what and where,
    and no record comes any more. `offset` is that of the first byte that is not yet part of an intact record.
    """

    def __init__(self, offset: int = len(MAGIC), sequence: int = 0) -> None:
        self.offset = offset
        self.ended = False
        self.damage = ""
        self.sequence = sequence  # of the next record
        self._bytes = bytearray()
        self._start = 0

    @property
    def left(self) -> int:
        """Bytes that came and are no whole record yet."""
        return len(self._bytes) - self._start

    def feed(self, data: bytes) -> None:
        del self._bytes[: self._start]
        self._start = 0
        self._bytes += data

    def take(self) -> Record | None:
        """The next intact record; None if there is none (yet)."""
        data, start = self._bytes, self._start
        if self.damage or self.ended or self.left < HEAD.size:
            return None
        kind, length, sequence = HEAD.unpack_from(data, start)
        if sequence != self.sequence or not HEADER <= kind <= SAMPLES or length > LONGEST:
            self.damage = f"damaged record head at byte {self.offset}"
            return None
        size = HEAD.size + length + CRC.size
        if self.left < size:
            return None
        body = start + HEAD.size
        payload = bytes(data[body : body + length])
        (crc,) = CRC.unpack_from(data, body + length)
        if crc != zlib.crc32(payload, zlib.crc32(data[start:body])):
            self.damage = f"damaged record at byte {self.offset}"
            return None
        self._start += size
        self.sequence += 1
        self.offset += size
        self.ended = kind == END
        return Record(kind, sequence, payload, self.offset)


def magic_fault(start: bytes) -> str:
    """What is wrong with the first bytes of a file, as the end of a sentence; "" if nothing is."""
    if start[: len(MAGIC) - 1] != MAGIC[:-1]:
        return "is not a Haltere journal"
    if start[len(MAGIC) - 1 : len(MAGIC)] != MAGIC[-1:]:
        return "is a journal of a format this version does not read"
    return ""
