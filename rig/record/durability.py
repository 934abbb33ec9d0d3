"""How bytes get to the disk and stay there: sync, free space, locks, renames.

Linux is tested. Elsewhere the fallbacks do what the standard library can; nothing is claimed for them.
"""

from __future__ import annotations

import contextlib
import os
import shutil
import threading
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
    except OSError:
        return False
    return True


def sync_folder(folder: Path) -> None:
    """Make a rename in `folder` last, where the system can."""
    with contextlib.suppress(OSError):
        descriptor = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)


class PeriodicSync:
    """Syncs a file every `period_s` from a thread of its own, and tells how far it got.

    A sync takes 4 ms as a rule and 40 ms at worst: too long for the loop that feeds the heartbeat.
    """

    def __init__(self, disk: Disk, descriptor: int, period_s: float = 0.1) -> None:
        self._disk = disk
        self._descriptor = descriptor
        self._period_s = period_s
        self._written = 0
        self.committed = 0  # bytes known to be on the disk
        self.failure: OSError | None = None
        self._stop = threading.Event()
        self._thread = threading.Thread(target=self._run, name="journal sync", daemon=True)
        self._thread.start()

    def wrote(self, total: int) -> None:
        """The file is now `total` bytes long."""
        self._written = total

    def stop(self) -> None:
        """Sync once more and end the thread."""
        self._stop.set()
        self._thread.join()
        self._sync()

    def _run(self) -> None:
        while not self._stop.wait(self._period_s):
            self._sync()

    def _sync(self) -> None:
        length = self._written
        if length == self.committed or self.failure is not None:
            return
        try:
            self._disk.sync(self._descriptor)
        except OSError as error:
            self.failure = error
        else:
            self.committed = length
