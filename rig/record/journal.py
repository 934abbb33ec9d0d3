"""The journal: every frame and event of a run, appended as it comes, readable after any crash.

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

Reading stops at the first byte that is not as it must be: nothing after a damage is believed, so no wrong row
ever comes out, and all before it does.
"""

from __future__ import annotations

import contextlib
import json
import os
import struct
import zlib
from collections.abc import Generator, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from drivers.rows import RowFrame
from rig.events import Event
from rig.record.durability import Disk, OsDisk, WriteBehind, free_bytes, lock, sync_folder
from rig.record.errors import Damaged, JournalFailure, NameTaken
from rig.record.samples import Samples

MAGIC = b"HLTRJNL\x01"
HEAD = struct.Struct("<BII")
CRC = struct.Struct("<I")
LONGEST = 64 * 2**20  # no record is longer; a length beyond is damage
READ_BYTES = 1 << 20  # read at once

HEADER, FRAME, EVENT, RESULT, LOSSES, END, SAMPLES = 1, 2, 3, 4, 5, 6, 7
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

    def samples(self, samples: Samples) -> None:
        self._append(SAMPLES, to_json(samples.to_json()))

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

    def __init__(self) -> None:
        self.offset = len(MAGIC)
        self.ended = False
        self.damage = ""
        self._bytes = bytearray()
        self._start = 0
        self._sequence = 0

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
        if sequence != self._sequence or not HEADER <= kind <= SAMPLES or length > LONGEST:
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
        self._sequence += 1
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


class Journal:
    """The intact part of a journal file, read piece by piece: a few MB of memory, whatever its length.

    Damaged if not even the header can be read; FileNotFoundError as usual. During iteration `good_bytes` counts
    what was intact; after it `ended` tells whether the end record was there, `damage` where and why reading
    stopped ("" if at the end). A disk that cannot be read any further is damage too.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self.ended = False
        self.damage = ""
        self.good_bytes = 0
        with path.open("rb") as file:
            try:
                start = file.read(len(MAGIC))
            except OSError as error:
                raise Damaged(f"{path} cannot be read: {error.strerror or error}") from error
        if fault := magic_fault(start):
            raise Damaged(f"{path} {fault}")
        with contextlib.closing(self._records()) as records:
            first = next(records, None)
        if first is None or first.kind != HEADER:
            raise Damaged(f"{path}: the journal's header is damaged, nothing can be recovered")
        try:
            self.header: dict[str, Any] = first.fields()
        except ValueError:
            raise Damaged(f"{path}: the journal's header is not readable, nothing can be recovered") from None

    def __iter__(self) -> Iterator[Record]:
        return self._records()

    def _records(self) -> Generator[Record, None, None]:
        # Not mapped into memory: a bad sector under a mapping ends the process where a read gives an error.
        stream = RecordStream()
        self.ended, self.damage, self.good_bytes = False, "", stream.offset
        with self.path.open("rb", buffering=0) as file:
            size = os.fstat(file.fileno()).st_size
            file.seek(len(MAGIC))
            data: bytes | None = b"more"
            while data and not stream.damage and not stream.ended:
                try:
                    data = file.read(READ_BYTES)
                except OSError as error:
                    self.damage = f"not readable after byte {stream.offset}: {error.strerror or error}"
                    return
                stream.feed(data or b"")
                while (record := stream.take()) is not None:
                    self.good_bytes, self.ended = record.end, stream.ended
                    yield record
        self.damage = stream.damage
        if stream.ended and size > stream.offset:
            self.damage = f"{size - stream.offset} bytes follow the end record"
        elif stream.left and not stream.damage:
            self.damage = f"cut off in a record at byte {stream.offset}"
