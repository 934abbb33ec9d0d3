"""Where a journal can be read on behind a damage, and whether its end is a torn one.

A record is believed again if everything about it fits: a kind, a length that stays within the file, a sequence
that goes on from the last good one and leaves no more records missing than there is room for, and the check sum.
No record can begin inside the JSON of another, which has no byte below 32 but blanks; inside a row frame one
could only by a chance of one in 2^32 for each place where also its sequence fits. Whether rows continue those
before is looked at by their own counters as well (`rig.record.placement`).
"""

from __future__ import annotations

import io
import re
import zlib

from rig.record.records import CRC, FRAME, HEAD, HEADER, LONGEST, SAMPLES

READ_BYTES = 1 << 20
SMALLEST = HEAD.size + CRC.size
#: A kind, and a length whose highest byte could be one.
HEADS = re.compile(b"[%c-%c](?=...[\\x00-\\x04])" % (FRAME, SAMPLES), re.DOTALL)
#: Disks write whole sectors: where the zeros of a torn end begin.
SECTOR_BYTES = 512


def resumption(file: io.FileIO, start: int, sequence: int, size: int) -> tuple[int, int] | None:
    """Place and sequence of the first good record behind the bad one at `start`; None if there is none.

    `sequence` is what the bad one should have had, `size` that of the file. OSError where the disk cannot be read.
    """
    work = 8 * size + LONGEST  # bytes to look through: a file made to look like heads everywhere ends too
    place = start + 1
    while place + SMALLEST <= size:
        file.seek(place)
        data = file.read(READ_BYTES + HEAD.size)
        for match in HEADS.finditer(data):
            at = match.start()
            if at + HEAD.size > len(data):
                break
            _, length, found = HEAD.unpack_from(data, at)
            here = place + at
            missing = found - sequence
            room = (here - start) // SMALLEST
            if not 0 <= missing <= room or length > min(LONGEST, size - here - SMALLEST):
                continue
            work -= length
            if work < 0:
                return None
            if _good(file, here, length):
                return here, found
        place += READ_BYTES
    return None


def _good(file: io.FileIO, place: int, length: int) -> bool:
    file.seek(place)
    body = file.read(HEAD.size + length)
    told = file.read(CRC.size)
    return len(told) == CRC.size and CRC.unpack(told)[0] == zlib.crc32(body)


def torn_zeros(file: io.FileIO, start: int, sequence: int, size: int) -> int:
    """How many zeros a file ends with that were never written; 0 if its end is not torn but damaged.

    A file system may make a file longer before it writes what belongs there: after a crash of the host the rest is
    zeros. They then begin right behind a whole record, or at a sector inside the one at `start`.
    """
    last = _last_written(file, start, size)
    if last < start:
        return size - start
    file.seek(start)
    head = file.read(min(HEAD.size, last + 1 - start))
    end = start + SMALLEST
    if len(head) == HEAD.size:
        kind, length, found = HEAD.unpack(head)
        if found != sequence or not HEADER <= kind <= SAMPLES or length > LONGEST:
            return 0
        end += length
    sector = -(-(last + 1) // SECTOR_BYTES) * SECTOR_BYTES
    return size - last - 1 if sector < min(size, end) else 0


def _last_written(file: io.FileIO, start: int, size: int) -> int:
    """Place of the last byte that is not zero; before `start` if there is none behind it."""
    end = size
    while end > start:
        begin = max(start, end - READ_BYTES)
        file.seek(begin)
        kept = file.read(end - begin).rstrip(b"\0")
        if kept:
            return begin + len(kept) - 1
        end = begin
    return start - 1
