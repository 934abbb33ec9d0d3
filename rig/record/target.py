"""The file a session is written to, so that a full disk is an error and nothing worse.

HDF5 does not stand a write that fails: it tells of it by the hundred while it is closed, leaves the file behind, and
may end the whole process. So no write fails for HDF5: the first error is kept, what comes after it is thrown away,
and whoever wrote is told once the file is closed.
"""

from __future__ import annotations

import contextlib
import errno
import io
from collections.abc import Iterator
from pathlib import Path

import h5py


class Target(io.RawIOBase):
    """A new file whose writes always seem to work; `failure` is the first error there was."""

    def __init__(self, raw: io.FileIO) -> None:
        super().__init__()
        self._raw = raw
        self.failure: OSError | None = None

    def readable(self) -> bool:
        return True

    def writable(self) -> bool:
        return True

    def seekable(self) -> bool:
        return True

    def readinto(self, buffer) -> int:  # type: ignore[no-untyped-def]
        view = memoryview(buffer).cast("B")
        found = self._raw.readinto(view) or 0
        if self.failure is not None:  # what was thrown away reads as zeros
            view[found:] = bytes(len(view) - found)
            found = len(view)
        return found

    def write(self, data) -> int:  # type: ignore[no-untyped-def]
        view = memoryview(data).cast("B")
        done = 0
        while done < len(view) and self.failure is None:
            try:
                sent = self._raw.write(view[done:]) or 0
                if not sent:
                    raise OSError(errno.EIO, "the disk takes nothing")
                done += sent
            except OSError as error:
                self.failure = error
        return len(view)

    def seek(self, offset: int, whence: int = 0) -> int:
        return self._raw.seek(offset, whence)

    def tell(self) -> int:
        return self._raw.tell()

    def truncate(self, size: int | None = None) -> int:
        try:
            return self._raw.truncate(size) if self.failure is None else size or 0
        except OSError as error:
            self.failure = error
            return size or 0


def opened(path: Path) -> io.FileIO:
    """A new file, or the old one emptied."""
    return io.FileIO(path, "w+")


@contextlib.contextmanager
def new_session(path: Path) -> Iterator[h5py.File]:
    """A new HDF5 file to be filled, whole once the block is left. OSError if it could not be written."""
    with opened(path) as raw:
        target = Target(raw)
        try:
            with h5py.File(target, "w", libver=("v110", "v110")) as file:
                yield file
        except (OSError, RuntimeError, ValueError):
            if target.failure is None:
                raise
        if target.failure is not None:
            raise target.failure
