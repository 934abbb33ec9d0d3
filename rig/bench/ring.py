"""The ring: the last rows as bins of least and greatest values, in a memory-mapped file, for the window only.

The bench process writes it and never waits; any number of other processes read it without asking. Nothing is
recorded here: what matters is in the journal, and a bin that was overwritten before anyone looked is gone.

Byte by byte (as this machine orders them; the file never leaves it):

    0      magic      8 bytes   b"HLTRRNG\\x01"      the last byte is the version of this layout
    8      sizes      4 x u64   channels, rows of a full bin, bins, board ticks a second
    40     file size  u64
    48     names      u32 length, then JSON: the channels' names
    2048   claimed    u64       bins that are, or are just being, written; on a line of the cache of its own
    2112   done       u64       bins that are there
    2176   told       u64       headers that are there
    2240   headers    8 x `HEADER`, the one numbered n in place n % 8
    4096   bins       `bin_type`, the one numbered n in place n % bins

A bin holds consecutive rows of one stretch without loss: it is full, or lost rows or the end of the run follow it.

Why no lock is needed. Bins: before the writer touches a place it counts up `claimed`, and only when the bins are
whole it counts up `done`. A reader takes `done`, copies, and takes `claimed` last: bin n shares its place with
n + bins, so a copy of n is whole if n + bins was not claimed by then; the others are dropped. Headers: the one that
is told is whole, and its place is used again only 8 headers later; the reader copies it and takes `told` again. If
the writer is killed at any point, what it had published stays readable.

What that rests on. Each counter is one aligned store or load of 8 bytes. The order of stores and loads is that of
the program on x86-64 (stores are seen in their order; loads keep theirs); elsewhere it is the lock taken and given
back at each `_in_order`: mutexes and semaphores order all memory around them (POSIX, base definitions, memory
synchronization; value from memory). Tested on x86-64.

What is not promised. Header and bins are published one after the other, so a header may be a block behind. A reader
that sleeps longer than the ring holds gets less than it asked for, down to nothing. A file that something else
shortens while it is mapped ends the process (SIGBUS); so does a disk that cannot page it in. Therefore: put the
file on a memory file system such as /dev/shm, where a busy disk cannot hold up the writer either.
"""

from __future__ import annotations

import contextlib
import json
import mmap
import os
import struct
import threading
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from drivers.rows import RowBlock
from rig.record.errors import Damaged, RecordError

MAGIC = b"HLTRRNG\x01"
SIZES = struct.Struct("=QQQQQI")
HEADER = struct.Struct("=QQQQQqqQQQ")
HEADERS = 8
CLAIMED, DONE, TOLD = 2048, 2112, 2176
HEADERS_AT = 2240
BINS_AT = 4096
MOST_BINS = 1 << 22


class RingFailure(RecordError):
    """The ring cannot be made; the run can do without."""


def bin_type(channels: int) -> np.dtype[np.void]:
    """One bin: its number from 0, the tick of its first row, low and high raw value of each channel, status bits of
    all its rows, how many rows it holds and how many were lost before the first."""
    return np.dtype(
        [
            ("number", np.uint64),
            ("tick", np.uint64),
            ("rows", np.uint32),
            ("lost_rows", np.uint32),
            ("status", np.uint32),
            ("low", np.int32, (channels,)),
            ("high", np.int32, (channels,)),
        ],
        align=True,
    )


@dataclass(frozen=True, slots=True)
class RingHeader:
    """Counters since the ring was made. Ticks are the board's, unwrapped; `committed` is of the journal."""

    rows: int = 0
    last_tick: int = 0
    lost_rows: int = 0
    lost_frames: int = 0
    overruns: int = 0
    committed_bytes: int = 0
    committed_sequence: int = -1
    heartbeat_tick: int = 0
    turns: int = 0  # of the loop
    closed: int = 0  # 1: the writer has closed it, nothing more will come


class _Mapped:
    """The mapped file and the counters in it."""

    def __init__(self, descriptor: int, size: int, access: int) -> None:
        self._map = mmap.mmap(descriptor, size, access=access)
        self._view = memoryview(self._map)
        self._claimed = self._view[CLAIMED : CLAIMED + 8].cast("Q")
        self._done = self._view[DONE : DONE + 8].cast("Q")
        self._told = self._view[TOLD : TOLD + 8].cast("Q")
        self._fence = threading.Lock()

    def _in_order(self) -> None:
        """All memory access before this comes before all after it."""
        with self._fence:
            pass

    def _unmap(self) -> None:
        for view in (self._claimed, self._done, self._told, self._view):
            view.release()
        self._map.close()


class RingWriter(_Mapped):
    """Makes a ring and writes it; one process, one thread.

    `names` are those of the channels, at most 255; a bin takes `rows_per_bin` rows, and the last `bins` are kept.
    All memory is taken at once, so that a full disk is told here and not in mid-run.
    Raises RingFailure if the file is there already or cannot be made, ValueError for impossible sizes.
    """

    def __init__(self, path: Path, names: Sequence[str], tick_hz: int, rows_per_bin: int, bins: int) -> None:
        channels, told = len(names), json.dumps(list(names)).encode()
        if not 1 <= channels <= 255 or rows_per_bin < 1 or not 2 <= bins <= MOST_BINS or tick_hz < 1:
            raise ValueError(f"no ring of {channels} channels and {bins} bins of {rows_per_bin} rows")
        type_ = bin_type(channels)
        size = BINS_AT + bins * type_.itemsize
        begin = MAGIC + SIZES.pack(channels, rows_per_bin, bins, tick_hz, size, len(told)) + told
        if len(begin) > CLAIMED:
            raise ValueError("channel names too long for a ring")
        try:
            descriptor = os.open(path, os.O_RDWR | os.O_CREAT | os.O_EXCL, 0o600)
        except FileExistsError:
            raise RingFailure(f"{path} is there already") from None
        except OSError as error:
            raise RingFailure(f"{path} cannot be made: {error.strerror}") from error
        try:
            if hasattr(os, "posix_fallocate"):
                os.posix_fallocate(descriptor, 0, size)
            else:
                os.ftruncate(descriptor, size)
            super().__init__(descriptor, size, mmap.ACCESS_WRITE)
        except OSError as error:
            with contextlib.suppress(OSError):
                path.unlink()
            raise RingFailure(f"{path} cannot be made: {error.strerror}") from error
        finally:
            os.close(descriptor)
        self.path = path
        self._channels = channels
        self._rows_per_bin = rows_per_bin
        self._bins = bins
        self._places = np.frombuffer(self._map, np.uint8, bins * type_.itemsize, BINS_AT).reshape(bins, -1)
        self._places[:] = 0  # every page is there now: none is fetched during the run
        # A block is folded into at most so many bins at a time, that readers always have half of the ring.
        self._most = min(bins // 2, 256)
        made = np.zeros(self._most + 1, type_)
        self._made = made.view(np.uint8).reshape(len(made), -1)
        # Looking a field up by name costs as much as filling it.
        self._number, self._tick, self._rows = made["number"], made["tick"], made["rows"]
        self._lost_rows, self._status = made["lost_rows"], made["status"]
        self._low, self._high = made["low"], made["high"]
        self._open_rows = 0  # of the bin in place 0 that still takes rows
        self._lost_before = 0
        self._rows_seen = self._lost_rows_seen = self._lost_frames_seen = self._overruns_seen = 0
        self._last_tick = 0
        self._overruns: int | None = None
        self._loop = (0, -1, 0, 0)  # what only the loop knows
        self._closed = False
        self._publish()
        self._view[: len(begin)] = begin

    def add(self, block: RowBlock) -> None:
        """Fold rows into bins, and count them and what was lost before them. ValueError for other channels."""
        count = len(block)
        if block.raw.shape != (count, self._channels):
            raise ValueError(f"a block of shape {block.raw.shape} for a ring of {self._channels} channels")
        if block.lost_rows or block.lost_frames:
            self._finish_open()
            self._lost_before += block.lost_rows
        piece = self._most * self._rows_per_bin
        for start in range(0, count, piece):
            stop = start + piece
            self._fold(block.tick[start:stop], block.raw[start:stop], int(block.status))
        if self._overruns is not None:
            self._overruns_seen += (block.overruns - self._overruns) & 0xFFFF
        self._overruns = block.overruns
        self._rows_seen += count
        self._lost_rows_seen += block.lost_rows
        self._lost_frames_seen += block.lost_frames
        if count:
            self._last_tick = int(block.tick[-1])
        self._publish()

    def tell(self, *, committed_bytes: int, committed_sequence: int, heartbeat_tick: int, turns: int) -> None:
        """What only the loop knows."""
        self._loop = (committed_bytes, committed_sequence, heartbeat_tick, turns)
        self._publish()

    def close(self) -> None:
        """Show the last, unfinished bin, say that nothing more comes, and let go; the file stays. Safe to repeat."""
        if self._closed:
            return
        self._closed = True
        self._finish_open()
        self._publish()
        del self._places
        self._unmap()

    # -- rows into bins --------------------------------------------------------------------------------

    def _fold(self, tick: NDArray[np.uint64], raw: NDArray[np.int32], status: int) -> None:
        """Rows of which the first go on in the open bin, which stands in place 0 of those being made."""
        count, full, filled = len(tick), self._rows_per_bin, self._open_rows
        starts = np.arange(
            -filled, count, full
        )  # first row of each bin; the open one began before this block
        starts[0] = 0
        made = len(starts)
        low = np.minimum.reduceat(raw, starts, axis=0)
        high = np.maximum.reduceat(raw, starts, axis=0)
        begin = 0
        if filled:
            begin = 1
            self._status[0] |= status
            np.minimum(low[0], self._low[0], out=low[0])
            np.maximum(high[0], self._high[0], out=high[0])
        self._low[:made], self._high[:made] = low, high
        self._tick[begin:made] = tick[starts[begin:]]
        self._status[begin:made] = status
        self._rows[:made] = full
        self._lost_rows[begin:made] = 0
        if self._lost_before and not filled:
            self._lost_rows[0], self._lost_before = self._lost_before, 0
        self._open_rows = (filled + count) % full
        whole = made - 1 if self._open_rows else made
        if whole:
            self._put(whole)
            if self._open_rows:
                self._made[0] = self._made[whole]

    def _finish_open(self) -> None:
        if self._open_rows:
            self._rows[0] = self._open_rows
            self._open_rows = 0
            self._put(1)

    # -- publishing ------------------------------------------------------------------------------------

    def _put(self, count: int) -> None:
        """Show the first `count` of the bins made."""
        number = self._done[0]
        self._number[:count] = np.arange(number, number + count)
        place = number % self._bins
        ahead = min(count, self._bins - place)
        self._claimed[0] = number + count
        self._in_order()
        self._places[place : place + ahead] = self._made[:ahead]
        if ahead < count:
            self._places[: count - ahead] = self._made[ahead:count]
        self._in_order()
        self._done[0] = number + count

    def _publish(self) -> None:
        number = self._told[0]
        self._in_order()
        HEADER.pack_into(
            self._view,
            HEADERS_AT + number % HEADERS * HEADER.size,
            self._rows_seen,
            self._last_tick,
            self._lost_rows_seen,
            self._lost_frames_seen,
            self._overruns_seen,
            *self._loop,
            self._closed,
        )
        self._in_order()
        self._told[0] = number + 1


class RingReader(_Mapped):
    """Reads the ring of another process (or of this one).

    Raises FileNotFoundError, or Damaged if the file is no ring of this layout and size. Not thread-safe.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        with path.open("rb") as file:
            size = os.fstat(file.fileno()).st_size
            begin = file.read(CLAIMED)
            if begin[: len(MAGIC) - 1] != MAGIC[:-1]:
                raise Damaged(f"{path} is not a ring of rows")
            if begin[len(MAGIC) - 1 : len(MAGIC)] != MAGIC[-1:]:
                raise Damaged(f"{path} is a ring of a version this version does not read")
            if len(begin) < CLAIMED:
                raise Damaged(f"{path} is a ring that was cut off")
            channels, rows, bins, hz, told, length = SIZES.unpack_from(begin, len(MAGIC))
            if not 1 <= channels <= 255 or rows < 1 or not 2 <= bins <= MOST_BINS or hz < 1:
                raise Damaged(f"{path} is a ring of impossible sizes")
            type_ = bin_type(channels)
            wanted = BINS_AT + bins * type_.itemsize
            if not size == told == wanted:
                raise Damaged(f"{path} is a ring of {size} bytes, where its sizes make {wanted}")
            names = begin[len(MAGIC) + SIZES.size :][:length]
            try:
                self.names = tuple(str(name) for name in json.loads(names))
            except ValueError:
                raise Damaged(f"{path} is a ring without readable channel names") from None
            if len(self.names) != channels:
                raise Damaged(f"{path} is a ring of {channels} channels with {len(self.names)} names")
            super().__init__(file.fileno(), size, mmap.ACCESS_READ)
        self.tick_hz, self.rows_per_bin, self.capacity = int(hz), int(rows), int(bins)
        self._type = type_
        self._places = np.frombuffer(self._map, np.uint8, bins * type_.itemsize, BINS_AT).reshape(bins, -1)
        self._closed = False

    def header(self) -> RingHeader:
        """The counters as of one moment."""
        while True:
            number = self._told[0]
            self._in_order()
            place = HEADERS_AT + (number - 1) % HEADERS * HEADER.size
            data = bytes(self._view[place : place + HEADER.size])
            self._in_order()
            if self._told[0] - number < HEADERS - 1:  # its place is used again for header number + 8 - 1
                return RingHeader(*HEADER.unpack(data))

    def bins(self, last: int, after: int = -1) -> NDArray[np.void]:
        """The last finished bins, oldest first, consecutive, at most `last` of them, numbered above `after`.

        A copy, of `bin_type(channels)`. Fewer if there are no more, or if they were overwritten meanwhile.
        """
        done = self._done[0]
        self._in_order()
        first = max(done - min(last, self.capacity), after + 1, 0)
        count = max(done - first, 0)
        place = first % self.capacity
        ahead = min(count, self.capacity - place)
        copy = np.empty((count, self._type.itemsize), np.uint8)
        copy[:ahead] = self._places[place : place + ahead]
        copy[ahead:] = self._places[: count - ahead]
        self._in_order()
        gone = max(self._claimed[0] - self.capacity - first, 0)
        return copy[min(gone, count) :].reshape(-1).view(self._type)

    def close(self) -> None:
        """Safe to call again."""
        if not self._closed:
            self._closed = True
            del self._places
            self._unmap()
