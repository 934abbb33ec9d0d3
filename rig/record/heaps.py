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
from pathlib import Path

SIGNATURE = b"GCOL\x01\0\0\0"
HEAD = struct.Struct("<8sQ")
OBJECT = struct.Struct("<HHIQ")
#: Smallest collection the library makes.
SMALLEST = 4096
READ_BYTES = 1 << 23


def damaged_heap(path: Path) -> int | None:
    """Where the first collection of texts begins that cannot be gone through; None if all can."""
    length = path.stat().st_size
    with path.open("rb") as file:
        for place in _collections(path):
            file.seek(place)
            _, size = HEAD.unpack(file.read(HEAD.size).ljust(HEAD.size, b"\0"))
            if not SMALLEST <= size <= length - place or not _sound(file.read(size - HEAD.size)):
                return place
    return None


def _collections(path: Path) -> list[int]:
    """Where collections begin. No text and no other part holds the signature with its zeros."""
    found = []
    with path.open("rb") as file:
        start, kept = 0, b""
        while data := file.read(READ_BYTES):
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
