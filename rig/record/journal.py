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

import contextlib
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
from rig.record.durability import Disk, OsDisk, WriteBehind, free_bytes, lock, sync_folder
from rig.record.errors import Damaged, JournalFailure, NameTaken

MAGIC = b"HLTRJNL\x01"
HEAD = struct.Struct("<BII")
CRC = struct.Struct("<I")
LONGEST = 64 * 2**20  # no record is longer; a length beyond is damage

HEADER, FRAME, EVENT, RESULT, LOSSES, END = 1, 2, 3, 4, 5, 6
AT_ONCE = (EVENT, RESULT)  # rare, and somebody waits for them: written without waiting for more


def encode(kind: int, sequence: int, payload: bytes) -> bytes:
    """One record as it stands in the file."""
    head = HEAD.pack(kind, len(payload), sequence)
    return b"".join((head, payload, CRC.pack(zlib.crc32(payload, zlib.crc32(head)))))


def to_json(fields: dict[str, Any]) -> bytes:
    return json.dumps(fields, separators=(",", ":"), allow_nan=False, default=str).encode()


class JournalWriter:
    """Appends records to a new file; a thread of its own writes and syncs them, so that no call waits for a disk.

    Raises NameTaken if the file exists, JournalFailure when there is less than `reserve_bytes` to begin with
    and, from the next call on, when writing or syncing failed or more than `backlog_bytes` wait for a disk that is
    too slow: then nothing more is taken, and what was written stays good. Space that runs low during the run shows
    in `free_bytes`, for the interlocks to end the run in time.

    Only the constructor, `flush` and `close` wait for the disk.
    """

    def __init__(
        self,
        path: Path,
        header: dict[str, Any],
        *,
        disk: Disk | None = None,
        reserve_bytes: float = 0.0,
        backlog_bytes: int = 32_000_000,
    ) -> None:
        self.path = path
        disk = disk or OsDisk()
        folder = path.absolute().parent
        free = free_bytes(disk, folder)
        if free < reserve_bytes:
            raise JournalFailure(
                f"only {free / 1e6:.0f} MB are left on the disk of {path}, less than the reserve of "
                f"{reserve_bytes / 1e6:.0f} MB"
            )
        first = to_json(header)
        taken = f"{path} is there already: another run, or one that was cut off (see 'haltere recover')"
        try:
            flags = os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_APPEND
            self._descriptor = os.open(path, flags, 0o644)
        except FileExistsError:
            raise NameTaken(taken) from None
        except OSError as error:
            raise JournalFailure(f"{path} cannot be created: {error.strerror}") from error
        self._closed = False
        try:
            if not lock(self._descriptor):
                raise NameTaken(taken)
            sync_folder(folder)
            self._behind = WriteBehind(disk, self._descriptor, folder, backlog_bytes)
        except BaseException:
            os.close(self._descriptor)
            raise
        try:
            self._append(HEADER, first)
            self.flush()
        except BaseException:
            self.close(ended=False)
            with contextlib.suppress(
                OSError
            ):  # without its header it is nothing, and would only be in the way
                path.unlink()
            raise

    @property
    def written(self) -> int:
        """Bytes of the file handed to the operating system: there even if this process is killed."""
        return self._behind.written

    @property
    def committed(self) -> int:
        """Bytes of the file known to be on the disk: there even after a power cut."""
        return self._behind.committed

    @property
    def committed_sequence(self) -> int:
        """Sequence of the last record known to be on the disk; -1 if there is none."""
        return self._behind.committed_pieces - 1

    @property
    def free_bytes(self) -> int:
        """Free space on the disk when last looked at (once a megabyte, and once a second while rows come)."""
        return self._behind.free_bytes

    def frame(self, frame: RowFrame) -> None:
        self._append(FRAME, frame.pack())

    def losses(self, rows: int, frames: int, overruns: int) -> None:
        self._append(LOSSES, to_json({"rows": rows, "frames": frames, "overruns": overruns}))

    def event(self, event: Event) -> None:
        self._append(EVENT, to_json(event.to_json()))

    def result(self, fields: dict[str, Any]) -> None:
        self._append(RESULT, to_json(fields))

    def flush(self) -> None:
        """Wait until everything handed in so far is with the operating system."""
        if not self._behind.wait():
            raise self._failure()

    def close(self, ended: bool = True) -> None:
        """Write the end record (unless the run broke off), sync, and close; safe to call again."""
        if self._closed:
            return
        try:
            if ended:
                self._append(END, b"{}")
        finally:
            self._closed = True
            self._behind.stop()
            os.close(self._descriptor)
        if ended and self._behind.failure:
            raise self._failure()

    def _append(self, kind: int, payload: bytes) -> None:
        if self._closed:
            raise JournalFailure(f"{self.path} is closed")
        if len(payload) > LONGEST:
            raise JournalFailure(f"{self.path} takes no record of {len(payload) / 1e6:.0f} MB")
        if not self._behind.put(
            lambda number: (b"" if number else MAGIC) + encode(kind, number, payload),
            urgent=kind in AT_ONCE,
        ):
            # A record after a torn one would never be read; pretending to take it would be a lie.
            raise self._failure()

    def _failure(self) -> JournalFailure:
        return JournalFailure(f"{self.path} cannot be written: {self._behind.failure}")


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
