"""Rows of a journal joined to pieces: neither a block of one frame each nor all in one array."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.rows import RowBlock

#: Rows of a piece: an hour of rows as blocks of one frame each would take more memory than the rows.
PIECE_ROWS = 1 << 16


@dataclass(frozen=True)
class Piece:
    """Consecutive rows: tick uint64 (n,), raw int32 (n, channels), status uint16 (n,)."""

    tick: NDArray[np.uint64]
    raw: NDArray[np.int32]
    status: NDArray[np.uint16]

    def __len__(self) -> int:
        return len(self.tick)


class Merger:
    """Joins blocks to pieces of PIECE_ROWS rows each, the last one shorter."""

    def __init__(self) -> None:
        self.pieces: list[Piece] = []
        self._waiting: list[RowBlock] = []
        self._rows = 0

    def add(self, block: RowBlock) -> None:
        self._waiting.append(block)
        self._rows += len(block)
        if self._rows >= PIECE_ROWS:
            self._join()

    def finish(self) -> list[Piece]:
        """All pieces; nothing may be added after."""
        if self._waiting:
            self._join()
        return self.pieces

    def _join(self) -> None:
        blocks, self._waiting = self._waiting, []
        lengths = [len(block) for block in blocks]
        status = np.repeat(np.array([block.status for block in blocks], dtype=np.uint16), lengths)
        tick = np.concatenate([block.tick for block in blocks])
        raw = np.concatenate([block.raw for block in blocks])
        # Copies: a view would keep the longer array alive.
        part = slice(0, PIECE_ROWS)
        self.pieces.append(Piece(tick[part].copy(), raw[part].copy(), status[part].copy()))
        self._rows = max(0, len(tick) - PIECE_ROWS)
        if self._rows:
            last = blocks[-1]  # only the last block can reach beyond, as pieces are joined once they are full
            rest = slice(len(last) - self._rows, len(last))
            self._waiting = [RowBlock(last.tick[rest].copy(), last.raw[rest].copy(), status=last.status)]
