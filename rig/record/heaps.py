"""Where HDF5 keeps texts, looked through before HDF5 reads them: these parts have no check sum.

A flipped bit in one can make the library read beyond it, or go round in it for ever. From the HDF5 File Format
Specification (version 3.0, III.E, global heap), all numbers little-endian:

    signature   4 bytes   GCOL
    version     u8        1, then three zeros
    size        u64       of the collection with this head
    objects, one after the other:
      index     u16       0: free space to the end, its size counts its own head
      count     u16       of references
      reserved  u32
      size      u64       of the data, which are padded to a multiple of 8 bytes

Fewer bytes at the end than a head has are free too. Sizes have eight bytes in every file this program writes.
"""

from __future__ import annotations

import struct
from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import BinaryIO

SIGNATURE = b"GCOL\x01\0\0\0"
HEAD = struct.Struct("<8sQ")
OBJECT = struct.Struct("<HHIQ")
#: Smallest collection the library makes.
SMALLEST = 4096
READ_BYTES = 1 << 23


Stretch = tuple[int, int]  # first byte, and the one after the last


def damaged_heap(path: Path, columns: Iterable[Stretch] = ()) -> int | None:
    """Where the first collection of texts begins that cannot be gone through; None if all can.

    `columns` are stretches that hold something else and need not be read.
    """
    length = path.stat().st_size
    with path.open("rb") as file:
        for start, end in between(columns, length):
            for place in _collections(file, start, end):
                file.seek(place)
                _, size = HEAD.unpack(file.read(HEAD.size).ljust(HEAD.size, b"\0"))
                if not SMALLEST <= size <= length - place or not _sound(file.read(size - HEAD.size)):
                    return place
    return None


def between(stretches: Iterable[Stretch], length: int) -> Iterator[Stretch]:
    """What lies between stretches of a file of `length` bytes."""
    at = 0
    for start, end in sorted(stretches):
        if start > at:
            yield at, min(start, length)
        at = max(at, end)
    if at < length:
        yield at, length


def _collections(file: BinaryIO, start: int, end: int) -> list[int]:
    """Where collections begin in a stretch. No text and no other part holds the signature with its zeros."""
    found = []
    file.seek(start)
    kept = b""
    while data := file.read(min(READ_BYTES, end - start)):
        joined = kept + data
        at = joined.find(SIGNATURE)
        while at >= 0:
            found.append(start - len(kept) + at)
            at = joined.find(SIGNATURE, at + 1)
        kept = joined[-len(SIGNATURE) + 1 :]
        start += len(data)
    return found


def _sound(objects: bytes) -> bool:
    at = 0
    while len(objects) - at >= OBJECT.size:
        index, _, _, size = OBJECT.unpack_from(objects, at)
        taken = size if index == 0 else OBJECT.size + (size + 7) // 8 * 8
        if not OBJECT.size <= taken <= len(objects) - at:
            return False
        at += taken
    return True
