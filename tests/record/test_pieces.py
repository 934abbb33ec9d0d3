"""Rows of a journal are merged into pieces without changing one of them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from small_journal import header

from drivers.rows import RowFrame
from rig.record import pieces
from rig.record.journal import JournalWriter
from rig.record.recording import read_recording
from rig.record.sealing import seal
from rig.session import open_session


def long_journal(path: Path, sizes: list[int]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Frames of these sizes, every seventh lost, each with a status of its own; what must come out."""
    random = np.random.default_rng(3)
    writer = JournalWriter(path, header())
    ticks, raws, statuses, first = [], [], [], 0
    for number, rows in enumerate(sizes):
        raw = random.integers(-(2**31), 2**31, (rows, 4), dtype=np.int64).astype(np.int32)
        tick, status = first * 1000, number % 5
        if number % 7 != 3:
            writer.frame(RowFrame(number, tick, 1000, first, status, 0, raw))
            ticks.append(np.arange(rows) * 1000 + tick)
            raws.append(raw)
            statuses.append(np.full(rows, status))
        first += rows
    writer.close()
    return np.concatenate(ticks), np.concatenate(raws), np.concatenate(statuses)


@pytest.mark.parametrize("piece_rows", [255, 256, 1000, 1 << 16])
def test_pieces_hold_what_the_frames_held(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, piece_rows: int
) -> None:
    """A frame has 255 rows at most, and many of them do not fit into a piece without a rest."""
    monkeypatch.setattr(pieces, "PIECE_ROWS", piece_rows)
    random = np.random.default_rng(1)
    sizes = [int(n) for n in random.integers(1, 256, 59)]
    tick, raw, status = long_journal(tmp_path / "a.journal", sizes)
    found = read_recording(tmp_path / "a.journal")
    assert [len(piece) for piece in found.pieces[:-1]] == [piece_rows] * (len(found.pieces) - 1)
    assert len(found) == len(tick) and found.frames == sum(n % 7 != 3 for n in range(59))
    np.testing.assert_array_equal(found.tick, tick)
    np.testing.assert_array_equal(found.raw, raw)
    np.testing.assert_array_equal(found.status, status)
    assert sum(loss[1] for loss in found.losses) == sum(n for k, n in enumerate(sizes) if k % 7 == 3)
    seal(tmp_path / "a.journal", tmp_path / "a.h5")
    with open_session(tmp_path / "a.h5") as session:
        board = session.streams["board"]
        np.testing.assert_array_equal(board.tick, tick)
        np.testing.assert_array_equal(board.status, status)
        np.testing.assert_array_equal(board.time_s, (tick - tick[0]) / 1e6)
        for column, name in enumerate(("body", "crank", "current", "voltage")):
            np.testing.assert_array_equal(board.raw(name), raw[:, column])
