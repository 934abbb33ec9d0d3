"""How bytes get to the disk and stay there: writing behind, sync, free space, locks, renames.

Linux is tested. Elsewhere the fallbacks do what the standard library can; nothing is claimed for them.
"""

from __future__ import annotations

import contextlib
import errno
import os
import shutil
import threading
import time
from collections.abc import Callable
from pathlib import Path
from typing import Protocol

try:
    import fcntl
except ImportError:  # not a POSIX system
    fcntl = None  # type: ignore[assignment]


class Disk(Protocol):
    """What the recorder asks of the operating system; tests put a failing one in its place."""

    def write(self, descriptor: int, data: bytes) -> int: ...

    def sync(self, descriptor: int) -> None: ...

    def free_bytes(self, folder: Path) -> int: ...


class OsDisk:
    """The operating system's own."""

    def write(self, descriptor: int, data: bytes) -> int:
        return os.write(descriptor, data)

    def sync(self, descriptor: int) -> None:
        getattr(os, "fdatasync", os.fsync)(descriptor)

    def free_bytes(self, folder: Path) -> int:
        return shutil.disk_usage(folder).free


def lock(descriptor: int) -> bool:
    """Take the file for this process alone; False if another has it."""
    if fcntl is None:
        return True  # exclusive creation is then the only guard
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        return False
    except OSError:  # a file system without locks: again the only guard
        return True
    return True


def free_bytes(disk: Disk, folder: Path) -> int:
    """Free space on the disk of `folder`; a great deal where nobody can tell, for the write itself will."""
    try:
        return disk.free_bytes(folder)
    except OSError:
        return 2**62


def sync_folder(folder: Path) -> None:
    """Make a rename in `folder` last, where the system can."""
    with contextlib.suppress(OSError):
        descriptor = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)


class WriteBehind:
    """Appends to a file from a thread of its own, and syncs it there.

    A sync takes 4 ms as a rule and 40 ms at worst, and a disk that is busy blocks a write for 0.3 s: too long for
    the loop that feeds the heartbeat, which only puts pieces into a list. They are written as one when there are
    BATCH_BYTES of them, at once when one is urgent, and else within WRITE_S; they are synced every SYNC_S. With
    nothing to do the thread sleeps until it is woken.

    The first error ends it: nothing more is taken, and what was written is synced once more and stays. Pieces that
    wait are bounded by `limit_bytes`; beyond that the disk is too slow, nothing more is taken, and what was taken
    is still written.

    Any thread may put and wait. `written` and `committed` never go back.
    """

    BATCH_BYTES = 1 << 15
    PIECE_BYTES = 1 << 20  # at most so much in one call, so that a slow disk shows its progress
    WRITE_S = 0.02
    SYNC_S = 0.1
    LOOK_S = 1.0  # free space is looked up so often, and once a megabyte

    def __init__(self, disk: Disk, descriptor: int, folder: Path, limit_bytes: int = 32_000_000) -> None:
        self._disk = disk
        self._descriptor = descriptor
        self._folder = folder
        self._limit_bytes = limit_bytes
        self.written = 0  # bytes handed to the operating system
        self.committed = 0  # bytes known to be on the disk
        self.written_pieces = 0  # whole ones
        self.committed_pieces = 0
        self.free_bytes = free_bytes(disk, folder)
        self.failure = ""  # what went wrong first
        # Condition is given a lock that is used as it is: an interrupt cannot fall between taking it and the block.
        self._lock = threading.Lock()
        self._work = threading.Condition(self._lock)
        self._done = threading.Condition(self._lock)
        # The number of pieces taken is _before + len(_pieces): one append, whatever an interrupt cuts in two.
        self._before = 0
        self._pieces: list[bytes] = []
        self._waiting_bytes = 0
        self._flying_bytes = 0
        self._urgent = self._asleep = self._stopping = False
        self._sync_due_s = time.monotonic() + self.SYNC_S
        self._look_due_s = time.monotonic() + self.LOOK_S
        self._looked_at = 0
        self._thread = threading.Thread(target=self._run, name="journal writer", daemon=True)
        self._thread.start()

    def put(self, make: Callable[[int], bytes], *, urgent: bool = False) -> bool:
        """Take one more piece: `make` is called with its number. False if none is taken any more (`failure`)."""
        with self._lock:
            if self.failure or self._stopping:
                return False
            waiting = self._waiting_bytes + self._flying_bytes
            if waiting > self._limit_bytes:
                self.failure = f"the disk is too slow: {waiting / 1e6:.0f} MB wait to be written"
                self._done.notify_all()
                return False
            piece = make(self._before + len(self._pieces))
            self._waiting_bytes += len(piece)
            self._pieces.append(piece)
            if urgent:
                self._urgent = True
            if urgent or self._asleep or self._waiting_bytes >= self.BATCH_BYTES:
                self._work.notify()
        return True

    def wait(self) -> bool:
        """Wait until all that was taken so far is handed to the operating system; False if that failed."""
        with self._lock:
            target = self._before + len(self._pieces)
            if not self.failure and self.written_pieces < target:
                self._urgent = True
                self._work.notify()
                self._done.wait_for(lambda: bool(self.failure) or self.written_pieces >= target)
            return not self.failure

    def stop(self) -> None:
        """Write what waits, sync, and end the thread; nothing is taken any more. Safe to call again."""
        with self._lock:
            self._stopping = True
            self._work.notify()
        self._thread.join()

    # -- the thread ------------------------------------------------------------------------------------

    def _run(self) -> None:
        try:
            while self._turn():
                pass
            self._sync()
        except Exception as error:  # whatever it is: a thread that died in silence would let the others wait
            words = (
                (error.strerror if isinstance(error, OSError) else "") or str(error) or type(error).__name__
            )
            with self._lock:
                self.failure = self.failure or words
                self._pieces, self._waiting_bytes, self._flying_bytes = [], 0, 0
                self._done.notify_all()

    def _turn(self) -> bool:
        """Wait for work and do it; False after the last."""
        with self._lock:
            if not (self._stopping or self._urgent or self._waiting_bytes >= self.BATCH_BYTES):
                self._asleep = not self._pieces and self.committed == self.written
                self._work.wait(None if self._asleep else self.WRITE_S)
                self._asleep = False
            pieces, self._pieces = self._pieces, []
            self._before += len(pieces)
            self._flying_bytes, self._waiting_bytes = self._waiting_bytes, 0
            self._urgent = False
            last = self._stopping
        if pieces:
            self._write(b"".join(pieces))
            with self._lock:
                self.written_pieces += len(pieces)
                self._flying_bytes = 0
                self._done.notify_all()
        now_s = time.monotonic()
        if now_s >= self._sync_due_s:
            self._sync_due_s = now_s + self.SYNC_S
            self._sync()
        if now_s >= self._look_due_s or self.written >= self._looked_at + 2**20:
            self._look_due_s = now_s + self.LOOK_S
            self._looked_at = self.written
            self.free_bytes = free_bytes(self._disk, self._folder)
        return not last

    def _write(self, data: bytes) -> None:
        for start in range(0, len(data), self.PIECE_BYTES):
            piece = data[start : start + self.PIECE_BYTES]
            while piece:
                try:
                    sent = self._disk.write(self._descriptor, piece)
                    if sent <= 0:
                        raise OSError(errno.EIO, "the disk takes nothing")
                except OSError:
                    with contextlib.suppress(OSError):
                        self._sync()
                    raise
                self.written += sent
                piece = piece[sent:]

    def _sync(self) -> None:
        length, pieces = self.written, self.written_pieces
        if length == self.committed:
            return
        self._disk.sync(self._descriptor)
        self.committed, self.committed_pieces = length, pieces
