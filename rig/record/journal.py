"""The journal of a run: its writer, and its reader (`rig.record.records` has it byte by byte)."""

from __future__ import annotations

import contextlib
import io
import os
from collections.abc import Generator, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from drivers.rows import RowFrame
from rig.events import Event
from rig.record.durability import Disk, OsDisk, WriteBehind, free_bytes, lock, sync_folder
from rig.record.errors import Damaged, JournalFailure, NameTaken
from rig.record.records import (
    CRC,
    END,
    EVENT,
    FRAME,
    HEAD,
    HEADER,
    LONGEST,
    LOSSES,
    MAGIC,
    RESULT,
    SAMPLES,
    Record,
    RecordStream,
    encode,
    magic_fault,
    to_json,
)  # fmt: skip
from rig.record.resumption import resumption, torn_zeros
from rig.record.samples import Samples

__all__ = [
    "CRC", "END", "EVENT", "FRAME", "HEAD", "HEADER", "LONGEST", "LOSSES", "MAGIC", "READ_BYTES", "RESULT",
    "SAMPLES", "Gap", "Journal", "JournalWriter", "Record", "RecordStream", "encode", "magic_fault", "to_json",
]  # fmt: skip

READ_BYTES = 1 << 20  # read at once
AT_ONCE = (EVENT, RESULT)  # rare, and somebody waits for them: written without waiting for more


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
class Gap:
    """Bytes of a journal that are no records: `start` up to `end`, and what shows it.

    `records` are missing in it by the numbers of those around it, None where no record stands behind it.
    `harmless` is an end as a crash leaves it, `torn` one of these in which part of a record stands.
    """

    start: int
    end: int
    what: str
    records: int | None = None
    harmless: bool = False
    torn: bool = False


class Journal:
    """The intact records of a journal file, read piece by piece: a few MB of memory, whatever its length.

    Damaged if not even the header can be read; FileNotFoundError as usual. During iteration `good_bytes` tells
    where the last intact record ended, `gaps` what could not be read before it; after it `ended` whether the end
    record was there, `damage` what was wrong first ("" if nothing). A disk that cannot be read any further is
    damage too, and nothing is looked for behind it.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self.ended = False
        self.gaps: list[Gap] = []
        self.good_bytes = 0
        self.size = 0
        with path.open("rb") as file:
            try:
                start = file.read(len(MAGIC))
            except OSError as error:
                raise Damaged(f"{path} cannot be read: {error.strerror or error}") from error
        if len(start) < len(MAGIC) and MAGIC.startswith(start):
            raise Damaged(f"{path} is cut off after {len(start)} bytes: it holds nothing to recover")
        if fault := magic_fault(start):
            raise Damaged(f"{path} {fault}")
        with contextlib.closing(self.records()) as records:
            first = next(records, None)
        if first is None and all(gap.harmless for gap in self.gaps):
            raise Damaged(f"{path} is cut off in its header, before any row: it holds nothing to recover")
        if first is None or first.kind != HEADER:
            raise Damaged(f"{path}: the journal's header is damaged, nothing can be recovered")
        try:
            self.header: dict[str, Any] = first.fields()
        except ValueError:
            raise Damaged(f"{path}: the journal's header is not readable, nothing can be recovered") from None

    @property
    def damage(self) -> str:
        return self.gaps[0].what if self.gaps else ""

    def __iter__(self) -> Iterator[Record]:
        return self.records()

    def records(self) -> Generator[Record, None, None]:
        """From the beginning, to be closed by whoever does not go to the end."""
        # Not mapped into memory: a bad sector under a mapping ends the process where a read gives an error.
        self.ended, self.gaps, self.good_bytes = False, [], len(MAGIC)
        stream: RecordStream | None = RecordStream()
        with self.path.open("rb", buffering=0) as file:
            self.size = os.fstat(file.fileno()).st_size
            while stream is not None:
                file.seek(stream.offset)
                data: bytes | None = b"more"
                while data and not stream.damage and not stream.ended:
                    try:
                        data = file.read(READ_BYTES)
                    except OSError as error:
                        self._unreadable(stream.offset, error)
                        return
                    stream.feed(data or b"")
                    while (record := stream.take()) is not None:
                        self.good_bytes, self.ended = record.end, stream.ended
                        yield record
                place = stream.offset
                try:
                    stream = self._behind(file, stream)
                except OSError as error:
                    self._unreadable(place, error)
                    return

    def _unreadable(self, place: int, error: OSError) -> None:
        what = f"not readable after byte {place}: {error.strerror or error}"
        self.gaps.append(Gap(place, self.size, what))

    def _behind(self, file: io.FileIO, stream: RecordStream) -> RecordStream | None:
        """Note what is wrong where a stream stopped, and go on behind it; None if there is no more."""
        start, size = stream.offset, self.size
        if stream.ended:
            if size > start:
                what = f"{size - start} bytes follow the end record"
                self.gaps.append(Gap(start, size, what, harmless=True))
            return None
        if not stream.damage and not stream.left:
            return None
        found = resumption(file, start, stream.sequence, size)
        if found is not None:
            # Without a word of the stream it was a length that leads beyond the end of the file.
            what = stream.damage or f"damaged record head at byte {start}"
            self.gaps.append(Gap(start, found[0], what, found[1] - stream.sequence))
            return RecordStream(*found)
        zeros = torn_zeros(file, start, stream.sequence, size)
        if zeros:
            what = f"cut off at byte {start}, the last {zeros} bytes are zeros that a crash of the host left"
            self.gaps.append(Gap(start, size, what, harmless=True))
        elif stream.damage:
            self.gaps.append(Gap(start, size, stream.damage))
        else:
            self.gaps.append(
                Gap(start, size, f"cut off in a record at byte {start}", harmless=True, torn=True)
            )
        return None
