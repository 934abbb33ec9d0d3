"""Row frames on their way from the simulated board to the host, some of them lost or damaged."""

from __future__ import annotations

import zlib

import numpy as np
from numpy.typing import NDArray

from drivers.rows import FrameSequence, RowBlock, RowFrame
from drivers.simulated.noise import FRAMES, stream
from drivers.simulated.world import World


class FrameLine:
    """Counts frames, sends them and hands over what arrives.

    `shift` added to a tick counted from boot gives the tick as the host unwraps it: a host that connects
    after the 32-bit tick has wrapped starts from the wrapped value.
    """

    def __init__(self, world: World) -> None:
        self.silent = False
        self.lose_next = 0
        self.damage_next = 0
        self.sequence = 0
        self.shift = 0
        self.frames: list[RowFrame] = []
        self.blocks: list[RowBlock] = []
        self._loss = world.lost_frame_probability
        self._random = stream(world.seed, FRAMES)
        self._placed = FrameSequence()

    def restart(self, tick: int) -> None:
        """A new connection at a tick counted from boot: the host knows nothing of frames before it."""
        self.shift = -(tick >> 32 << 32)
        self.frames, self.blocks = [], []
        self._placed = FrameSequence()

    def send(self, tick: int, period: int, first_row: int, status: int, raw: NDArray[np.int32]) -> bool:
        """Send one frame; False if it arrived damaged (the host can tell by its check sum)."""
        sequence = self.sequence
        self.sequence += 1
        # One draw per frame whatever happens to it, so that a fault does not shift later losses.
        lost = self._loss > 0.0 and self._random.random() < self._loss
        if lost or self.silent:
            return True
        if self.lose_next > 0:
            self.lose_next -= 1
            return True
        frame = RowFrame(
            sequence & 0xFFFFFFFF, tick & 0xFFFFFFFF, period, first_row & 0xFFFFFFFF, status, 0, raw
        )
        if self.damage_next > 0:
            self.damage_next -= 1
            return not self._damaged_beyond_use(frame)
        self.frames.append(frame)
        block = self._placed.place(frame)
        self.shift = int(block.tick[0]) - tick
        self.blocks.append(block)
        return True

    def take(self) -> tuple[list[RowFrame], list[RowBlock]]:
        taken = self.frames, self.blocks
        self.frames, self.blocks = [], []
        return taken

    def _damaged_beyond_use(self, frame: RowFrame) -> bool:
        """Flip one bit of the frame's bytes in transit and check them at the far end."""
        sent = bytearray(frame.pack())
        check = zlib.crc32(sent)
        bit = (frame.sequence * 2654435761) % (8 * len(sent))
        sent[bit // 8] ^= 1 << (bit % 8)
        return zlib.crc32(sent) != check
