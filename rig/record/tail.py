"""Following a journal that another process is still writing."""

from __future__ import annotations

import os
from pathlib import Path
from types import TracebackType

from rig.record.errors import Damaged
from rig.record.journal import READ_BYTES
from rig.record.records import HEADER, MAGIC, Record, RecordStream, magic_fault

#: One poll stops once it has read so much and found a record, so that a late follower does not hold a whole run.
POLL_BYTES = 16 * READ_BYTES


class JournalTail:
    """The records of a growing journal, in order, each once.

    An incomplete record at the end is "not yet", for its writer is at work. Bytes that are all there and are wrong
    (a check sum, a sequence, a length no record has) never become right: poll gives what was intact before them,
    and from then on raises Damaged. What is not yet on the disk may be gone after a power cut: a follower that
    must not know more than the disk says `up_to` the writer's `committed` bytes.

    Raises FileNotFoundError if there is no such file yet. Keeps a descriptor open until `close`; not thread-safe.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self._file = path.open("rb", buffering=0)
        self._stream = RecordStream()
        self._start = b""  # of the file, until the magic is whole
        self._read_bytes = 0
        self._fault = ""

    def __enter__(self) -> JournalTail:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Safe to call again."""
        self._file.close()

    @property
    def ended(self) -> bool:
        """Whether the end record has come: nothing more will."""
        return self._stream.ended

    @property
    def offset(self) -> int:
        """Bytes of the file that were given out as intact records, with the magic before them."""
        return self._stream.offset

    def poll(self, up_to: int | None = None) -> list[Record]:
        """The whole records that came since the last poll, at once; an empty list if none did.

        A long backlog comes in several polls: poll until nothing comes. Bytes from offset `up_to` on are left for
        later. Raises Damaged.
        """
        if self._fault:
            raise Damaged(f"{self.path} {self._fault}")
        records: list[Record] = []
        limit = None if up_to is None else up_to - self._read_bytes
        read = 0
        while not self.ended and not (records and read >= POLL_BYTES):
            size = READ_BYTES if limit is None else min(READ_BYTES, limit - read)
            data = self._more(size) if size > 0 else b""
            if not data:
                break
            read += len(data)
            self._take(data, records)
            if self._fault:
                break
        if self._fault and not records:
            raise Damaged(f"{self.path} {self._fault}")
        return records

    def _more(self, size: int) -> bytes:
        try:
            data = self._file.read(size) or b""
            if not data and os.fstat(self._file.fileno()).st_size < self._read_bytes:
                self._fault = "became shorter while it was read"
        except OSError as error:
            self._fault = f"cannot be read after byte {self._read_bytes}: {error.strerror or error}"
            return b""
        self._read_bytes += len(data)
        return data

    def _take(self, data: bytes, records: list[Record]) -> None:
        missing = len(MAGIC) - len(self._start)
        if missing > 0:
            self._start += data[:missing]
            data = data[missing:]
            if len(self._start) < len(MAGIC) and MAGIC.startswith(self._start):
                return
            self._fault = magic_fault(self._start)
            if self._fault:
                return
        self._stream.feed(data)
        while (record := self._stream.take()) is not None:
            if record.sequence == 0 and record.kind != HEADER:
                self._fault = "has no header"
                return
            records.append(record)
        if self._stream.damage:
            self._fault = f"has a {self._stream.damage}"
        elif self.ended and self._stream.left:
            self._fault = f"has {self._stream.left} bytes or more after its end record"
