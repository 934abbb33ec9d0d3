"""Frames placed in time, also behind a stretch of the journal that could not be read."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from drivers.rows import FrameDamaged, FrameSequence, RowBlock, RowFrame

WRAP = 1 << 32


class Placement:
    """Unwraps the counters of frames as a run does; behind a damage only if all of them say the same.

    `last_tick` is that of the last row so far, None before the first.
    """

    def __init__(self) -> None:
        self.last_tick: int | None = None
        self._sequence = FrameSequence()
        self._last: RowFrame | None = None
        self._lift = 0  # whole turns of the tick that fell into a damage, in ticks

    def fits(self, frame: RowFrame) -> bool:
        """Whether a frame behind a damage continues the rows before it.

        Frames, rows and ticks are counted apart from each other: a frame of another run, or of another place, would
        have to agree in all three.
        """
        last = self._last
        if last is None:
            return True
        ahead = (frame.sequence - last.sequence) % WRAP
        rows = (frame.first_row - last.first_row) % WRAP
        lost = rows - len(last.raw)
        return (
            frame.period == last.period
            and frame.raw.shape[1] == last.raw.shape[1]
            and 0 < ahead < WRAP // 2
            and ahead - 1 <= lost < WRAP // 2
            and (last.tick + rows * last.period - frame.tick) % WRAP == 0
        )

    def place(self, frame: RowFrame, behind: bool = False, near_tick: int | None = None) -> RowBlock:
        """The next frame as a block. Behind a damage ticks are unwrapped by the rows that are missing, for the gap
        may be longer than a turn of the tick; with no row before, by `near_tick`, that of an event.

        FrameDamaged for one that came again, or that does not fit.
        """
        if behind and not self.fits(frame):
            raise FrameDamaged(f"row frame {frame.sequence} does not continue the rows before the damage")
        block = self._sequence.place(frame)
        first = int(block.tick[0])
        if behind and self.last_tick is not None:
            self._lift = self.last_tick + frame.period * (1 + block.lost_rows) - first
        elif behind and near_tick is not None:
            self._lift = max(0, round((near_tick - first) / WRAP)) * WRAP
        if self._lift:
            block = replace(block, tick=block.tick + np.uint64(self._lift))
        self.last_tick = int(block.tick[-1])
        self._last = frame
        return block
