"""The journal: every frame and event of a run, appended as it comes, readable after any crash.

Byte by byte (little-endian):

    magic    8 bytes   b"HLTRJNL\\x01"        the last byte is the format version
    records, one after the other:
      type      u8     1 header, 2 row frame, 3 event, 4 result, 5 losses, 6 end
      length    u32    of the payload
      sequence  u32    0, 1, 2, ... without a gap
      payload   `length` bytes
      crc       u32    CRC-32 (as in IEEE 802.3) of type, length, sequence and payload

The first record is the header: JSON with rig, protocol and calibration texts, the channel table, tick rate,
software versions and the date. A row frame's payload is the frame as the bench sent it (`drivers.rows`).
Losses precede the frame they were found before: {"rows", "frames", "overruns"}. Events and results are JSON.
The end record closes a complete journal; one without it is an orphan, to be sealed by `haltere recover`.

Reading stops at the first byte that is not as it must be: nothing after a damage is believed, so no wrong row
ever comes out, and all before it does.
"""

from __future__ import annotations

import json
import os
import struct
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from drivers.rows import RowFrame
from rig.events import Event
from rig.record.durability import Disk, OsDisk, PeriodicSync, lock
from rig.record.errors import Damaged, JournalFailure, NameTaken

MAGIC = b"HLTRJNL\x01"
HEAD = struct.Struct("<BII")
CRC = struct.Struct("<I")
LONGEST = 64 * 2**20  # no record is longer; a length beyond is damage
BATCH_BYTES = 1 << 15

HEADER, FRAME, EVENT, RESULT, LOSSES, END = 1, 2, 3, 4, 5, 6


def encode(kind: int, sequence: int, payload: bytes) -> bytes:
    """One record as it stands in the file."""
    head = HEAD.pack(kind, len(payload), sequence)
    return b"".join((head, payload, CRC.pack(zlib.crc32(payload, zlib.crc32(head)))))


def to_json(fields: dict[str, Any]) -> bytes:
    return json.dumps(fields, separators=(",", ":"), allow_nan=False, default=str).encode()


class JournalWriter:
    """Appends records to a new file. Records are written in batches and synced from a thread of their own.

    Raises NameTaken if the file exists, JournalFailure when there is less than `reserve_bytes` to begin with
    and when writing or syncing fails: then nothing more is taken, and what was written stays good. Space that
    runs low during the run shows in `free_bytes`, for the interlocks to end the run in time.
    """

    def __init__(
        self, path: Path, header: dict[str, Any], *, disk: Disk | None = None, reserve_bytes: float = 0.0
    ) -> None:
        self.path = path
        self._disk = disk or OsDisk()
        self._free = self._free_now()
        if self._free < reserve_bytes:
            raise JournalFailure(
                f"only {self._free / 1e6:.0f} MB are left on the disk of {path}, less than the reserve of "
                f"{reserve_bytes / 1e6:.0f} MB"
            )
        try:
            flags = os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_APPEND
            self._descriptor = os.open(path, flags, 0o644)
        except FileExistsError:
            raise NameTaken(
                f"{path} is there already: another run, or one that was cut off (see 'haltere recover')"
            ) from None
        except OSError as error:
            raise JournalFailure(f"{path} cannot be created: {error.strerror}") from error
        lock(self._descriptor)
        self._buffer = bytearray(MAGIC)
        self._length = 0
        self._sequence = 0
        self._closed = False
        self._failed = ""
        self._sync = PeriodicSync(self._disk, self._descriptor)
        try:
            self._append(HEADER, to_json(header))
            self.flush()
        except JournalFailure:
            self.close(ended=False)
            raise

    @property
    def committed(self) -> int:
        """Bytes of the file known to be on the disk."""
        return self._sync.committed

    @property
    def free_bytes(self) -> int:
        """Free space on the disk when last looked at (once a megabyte)."""
        return self._free

    def frame(self, frame: RowFrame) -> None:
        self._append(FRAME, frame.pack())

    def losses(self, rows: int, frames: int, overruns: int) -> None:
        self._append(LOSSES, to_json({"rows": rows, "frames": frames, "overruns": overruns}))

    def event(self, event: Event) -> None:
        self._append(EVENT, to_json(event.to_json()))

    def result(self, fields: dict[str, Any]) -> None:
        self._append(RESULT, to_json(fields))

    def flush(self) -> None:
        """Hand everything to the operating system."""
        self._refuse_after_failure()
        if not self._buffer:
            return
        data = bytes(self._buffer)
        self._buffer.clear()
        sent = 0
        while sent < len(data):
            try:
                sent += self._disk.write(self._descriptor, data[sent:])
            except OSError as error:
                self._failed = f"{self.path} cannot be written: {error.strerror or error}"
                raise JournalFailure(self._failed) from error
        if self._length // 2**20 != (self._length + sent) // 2**20:
            self._free = self._free_now()
        self._length += sent
        self._sync.wrote(self._length)
        if self._sync.failure is not None:
            self._failed = f"{self.path} cannot be written: {self._sync.failure.strerror}"
            raise JournalFailure(self._failed) from self._sync.failure

    def close(self, ended: bool = True) -> None:
        """Write the end record (unless the run broke off), sync, and close; safe to call again."""
        if self._closed:
            return
        try:
            if ended:
                self._append(END, b"{}")
                self.flush()
            elif not self._failed:
                self.flush()
        finally:
            self._closed = True
            self._sync.stop()
            os.close(self._descriptor)
        if ended and self._sync.failure is not None:
            raise JournalFailure(f"{self.path} cannot be written: {self._sync.failure.strerror}")

    def _append(self, kind: int, payload: bytes) -> None:
        if self._closed:
            raise JournalFailure(f"{self.path} is closed")
        self._refuse_after_failure()
        self._buffer += encode(kind, self._sequence, payload)
        self._sequence += 1
        if len(self._buffer) >= BATCH_BYTES:
            self.flush()

    def _refuse_after_failure(self) -> None:
        # A record after a torn one would never be read; pretending to take it would be a lie.
        if self._failed:
            raise JournalFailure(self._failed)

    def _free_now(self) -> int:
        try:
            return self._disk.free_bytes(self.path.absolute().parent)
        except OSError:
            return 2**62  # a file system that cannot tell: the write itself will


@dataclass(frozen=True)
class Record:
    """One intact record."""

    kind: int
    sequence: int
    payload: bytes
    end: int  # offset of the byte after it

    def fields(self) -> dict[str, Any]:
        """The payload of a JSON record."""
        found = json.loads(self.payload)
        if not isinstance(found, dict):
            raise ValueError("not a JSON object")
        return found


class Journal:
    """The intact part of a journal file.

    Damaged if not even the header can be read; FileNotFoundError as usual. After iteration `ended` tells
    whether the end record was there, `damage` where and why reading stopped ("" if at the end).
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self.ended = False
        self.damage = ""
        self.good_bytes = 0
        self._data = path.read_bytes()
        if self._data[: len(MAGIC) - 1] != MAGIC[:-1]:
            raise Damaged(f"{path} is not a Haltere journal")
        if self._data[len(MAGIC) - 1 : len(MAGIC)] != MAGIC[-1:]:
            raise Damaged(f"{path} is a journal of a format this version does not read")
        first = next(iter(self), None)
        if first is None or first.kind != HEADER:
            raise Damaged(f"{path}: the journal's header is damaged, nothing can be recovered")
        try:
            self.header: dict[str, Any] = first.fields()
        except ValueError:
            raise Damaged(f"{path}: the journal's header is not readable, nothing can be recovered") from None

    def __iter__(self) -> Iterator[Record]:
        data, offset, sequence = self._data, len(MAGIC), 0
        self.ended, self.damage = False, ""
        while True:
            self.good_bytes = offset
            left = len(data) - offset
            if left == 0:
                return
            if self.ended:
                self.damage = f"{left} bytes follow the end record"
                return
            if left < HEAD.size:
                self.damage = f"cut off in a record at byte {offset}"
                return
            kind, length, number = HEAD.unpack_from(data, offset)
            body = offset + HEAD.size
            end = body + length + CRC.size
            if number != sequence or not HEADER <= kind <= END or length > LONGEST:
                self.damage = f"damaged record head at byte {offset}"
                return
            if end > len(data):
                self.damage = f"cut off in a record at byte {offset}"
                return
            payload = data[body : body + length]
            (crc,) = CRC.unpack_from(data, body + length)
            if crc != zlib.crc32(payload, zlib.crc32(data[offset:body])):
                self.damage = f"damaged record at byte {offset}"
                return
            self.ended = kind == END
            yield Record(kind, number, payload, end)
            offset = end
            sequence += 1
