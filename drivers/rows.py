"""Rows of raw integers, and the row frame: the binary form they have on a link and in a journal.

A row frame holds consecutive rows, equally spaced in board ticks (little-endian):

    sequence   u32   frame count since the board booted, wraps
    tick       u32   board tick of the first row, wraps (1 MHz: every 71.6 minutes)
    period     u32   ticks between rows
    first_row  u32   rows sampled since boot before this frame, wraps; a jump is lost rows
    status     u16   `Status` bits while the frame was filled
    overruns   u16   rows the board itself had to drop since boot, wraps
    rows       u8
    channels   u8
    samples    rows x channels i32, row by row

Loss is never silent: a jump in `sequence` or `first_row` is told in the block that follows it.
"""

from __future__ import annotations

import enum
import struct
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

HEADER = struct.Struct("<IIIIHHBB")


class Status(enum.IntFlag):
    """State of the board, in every row frame."""

    ENABLED = 1  # the power stage is on
    LOCKED = 2  # the drive register is frozen for an analysed interval
    LATCHED = 4  # switched off by the board itself; needs a fresh arm
    GUARD_OPEN = 8
    STOP_PRESSED = 16
    STALL = 32
    WATCHDOG = 64  # no heartbeat in time
    BRIDGE_FAULT = 128
    RAMPING = 256  # the drive register is on its way to its target
    UNDERVOLTAGE = 512


@dataclass(frozen=True, slots=True)
class RowBlock:
    """Consecutive rows of one stream.

    tick       uint64, shape (n,): board ticks, unwrapped, strictly increasing
    raw        int32, shape (n, channels)
    sequence   unwrapped frame count of the (last) frame in the block
    status     `Status` bits
    lost_rows, lost_frames   lost immediately before this block
    """

    tick: NDArray[np.uint64]
    raw: NDArray[np.int32]
    sequence: int = 0
    status: int = 0
    overruns: int = 0
    lost_rows: int = 0
    lost_frames: int = 0

    def __len__(self) -> int:
        return len(self.tick)


class FrameDamaged(ValueError):
    """A row frame whose own lengths contradict each other."""


@dataclass(frozen=True, slots=True)
class RowFrame:
    """A row frame as sent: wrapped counters, not yet placed in time."""

    sequence: int
    tick: int
    period: int
    first_row: int
    status: int
    overruns: int
    raw: NDArray[np.int32]

    def pack(self) -> bytes:
        rows, channels = self.raw.shape
        head = HEADER.pack(
            self.sequence & 0xFFFFFFFF,
            self.tick & 0xFFFFFFFF,
            self.period,
            self.first_row & 0xFFFFFFFF,
            self.status,
            self.overruns & 0xFFFF,
            rows,
            channels,
        )
        return head + np.ascontiguousarray(self.raw, dtype="<i4").tobytes()

    @classmethod
    def unpack(cls, payload: bytes) -> RowFrame:
        """Read one frame; FrameDamaged if its size is not what its header says."""
        if len(payload) < HEADER.size:
            raise FrameDamaged(f"a row frame of {len(payload)} bytes is shorter than its header")
        sequence, tick, period, first_row, status, overruns, rows, channels = HEADER.unpack_from(payload)
        if rows == 0 or channels == 0 or period == 0:
            raise FrameDamaged("a row frame without rows, channels or period")
        if len(payload) != HEADER.size + 4 * rows * channels:
            raise FrameDamaged(f"a row frame of {len(payload)} bytes cannot hold {rows} x {channels} samples")
        raw = np.frombuffer(payload, dtype="<i4", offset=HEADER.size).reshape(rows, channels)
        return cls(sequence, tick, period, first_row, status, overruns, raw.astype(np.int32))


class FrameSequence:
    """Places frames in time: unwraps their counters and tells what is missing between them."""

    def __init__(self) -> None:
        self._tick: int | None = None
        self._sequence = 0
        self._next_row = 0

    def place(self, frame: RowFrame) -> RowBlock:
        """Turn the next received frame into a block; older or repeated frames raise FrameDamaged."""
        rows = frame.raw.shape[0]
        if self._tick is None:
            tick, sequence = frame.tick, frame.sequence
            lost_rows = lost_frames = 0
            self._next_row = frame.first_row
        else:
            ahead = (frame.sequence - self._sequence) & 0xFFFFFFFF
            if ahead == 0 or ahead >= 0x80000000:
                raise FrameDamaged(f"row frame {frame.sequence} came again or out of order")
            tick = self._tick + ((frame.tick - self._tick) & 0xFFFFFFFF)
            sequence = self._sequence + ahead
            lost_frames = ahead - 1
            lost_rows = (frame.first_row - self._next_row) & 0xFFFFFFFF
        ticks = np.arange(tick, tick + rows * frame.period, frame.period, dtype=np.uint64)
        self._tick = tick + (rows - 1) * frame.period
        self._sequence = sequence
        self._next_row = (frame.first_row + rows) & 0xFFFFFFFF
        return RowBlock(
            tick=ticks,
            raw=frame.raw,
            sequence=sequence,
            status=frame.status,
            overruns=frame.overruns,
            lost_rows=lost_rows,
            lost_frames=lost_frames,
        )
