"""Overviews: the smallest and largest of every so many rows, from the file or from the rows, and of any window."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from small_journal import CHANNELS, header

from drivers.rows import RowFrame
from rig.record import overview
from rig.record.errors import Damaged
from rig.record.journal import JournalWriter
from rig.record.rowclock import RowClock
from rig.record.sealing import seal
from rig.session import Stream, open_session

ROWS, FRAME = 70_000, 250
LOST = (3, 4, 100, 279)  # frames


def by_hand(raw: np.ndarray, size: int) -> np.ndarray:
    parts = [raw[start : start + size] for start in range(0, len(raw), size)]
    return np.array([(part.min(), part.max()) for part in parts], dtype=np.int32).reshape(-1, 2)


@settings(deadline=None, max_examples=60)
@given(st.integers(0, 2**32), st.lists(st.integers(0, 5000), max_size=8), st.integers(1, 40))
def test_a_pyramid_given_in_parts_is_that_of_the_whole(seed: int, sizes: list[int], fewest: int) -> None:
    raw = np.random.default_rng(seed).integers(-(2**31), 2**31, sum(sizes), dtype=np.int64).astype(np.int32)
    parts = np.split(raw, np.cumsum(sizes)[:-1]) if sizes else []
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(overview, "FEWEST_BINS", fewest + 1)
        found = overview.pyramid(parts, len(raw))
        assert list(found) == overview.levels(len(raw))
    for size, bins in found.items():
        assert bins.dtype == np.int32
        np.testing.assert_array_equal(bins, by_hand(raw, size))
    # The last level is coarse enough, the one before was not.
    assert not found or len(found[max(found)]) <= fewest < overview.bins_of(len(raw), max(found) // 16)


def test_levels_of_an_hour() -> None:
    """36 million rows: 16 x 16 x 16 x 16 rows a bin leave 550 of them."""
    assert overview.levels(36_000_000) == [16, 256, 4096, 65536]
    assert overview.levels(1999) == [] and overview.levels(2000) == [16]


@settings(deadline=None)
@given(st.lists(st.tuples(st.integers(1, 30), st.integers(0, 5)), min_size=1, max_size=12), st.integers(1, 9))
def test_rows_and_ticks_without_the_column(stretches: list[tuple[int, int]], period: int) -> None:
    ticks: list[int] = []
    losses, tick = [], 1000
    for rows, lost in stretches:
        if ticks and lost:
            losses.append((tick + lost * period, lost))
        tick += lost * period if ticks else 0
        ticks += [tick + k * period for k in range(rows)]
        tick += rows * period
    clock = RowClock(ticks[0], ticks[-1], len(ticks), period, losses)
    np.testing.assert_array_equal(clock.tick(np.arange(len(ticks))), ticks)
    for wanted in range(ticks[0] - 3, ticks[-1] + 3):
        assert clock.row(wanted) == np.searchsorted(ticks, wanted)
    with pytest.raises(ValueError, match="last tick"):
        RowClock(ticks[0], ticks[-1] + period, len(ticks), period, losses)


@pytest.fixture(scope="module")
def session(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """70 s at 1 kHz, some frames lost; one channel counts backwards, as a transducer mounted upside down."""
    folder = tmp_path_factory.mktemp("overview")
    channels: list[dict[str, Any]] = [dict(channel) for channel in CHANNELS]
    channels[2] |= {"scale": -6.1e-4, "offset": 0.25}
    writer = JournalWriter(folder / "a.journal", {**header(), "channels": channels})
    random = np.random.default_rng(7)
    for number in range(ROWS // FRAME):
        raw = random.integers(-30_000, 30_000, (FRAME, 4)).astype(np.int32)
        if number not in LOST:
            first = number * FRAME
            writer.frame(RowFrame(number, 5000 + first * 1000, 1000, first, 1, 0, raw))
    writer.close()
    seal(folder / "a.journal", folder / "a.h5")
    return folder / "a.h5"


def windows() -> list[tuple[int, int, int]]:
    """Start, end and number of bins: all, parts across losses, single rows, and nothing."""
    random = np.random.default_rng(2)
    made = [(0, 2**40, n) for n in (1, 100, 200, 3000, 10**6)]
    for _ in range(40):
        start = int(random.integers(0, 70_000_000))
        made.append((start, start + int(10 ** random.uniform(0, 7.8)), int(10 ** random.uniform(0, 3.5))))
    return [*made, (5000, 5001, 10), (10**9, 10**10, 5), (50, 20, 5), (-(10**12), 10**6, 3)]


@pytest.mark.parametrize("kept", ["all", "no overview", "no losses told"])
def test_any_window_holds_every_extreme_and_reads_no_more_than_it_shows(
    session: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, kept: str
) -> None:
    copy = tmp_path / "b.h5"
    copy.write_bytes(session.read_bytes())
    with h5py.File(copy, "r+") as file:
        if kept == "no overview":
            del file["overview"]  # a session from before there were any
        elif kept == "no losses told":
            for name in ("tick", "rows", "frames", "overruns"):  # then the ticks themselves must be read
                del file[f"losses/{name}"]
                file[f"losses/{name}"] = np.empty(0, dtype="u8")
    read = 0
    original = Stream._part

    def counting(self: Stream, data: Any, first: int, end: int) -> Any:
        nonlocal read
        read += end - first
        return original(self, data, first, end)

    with open_session(copy) as opened:
        board = opened.streams["board"]
        tick, time_s = board.tick, board.time_s
        assert len(tick) == ROWS - FRAME * len(LOST)
        columns = {name: board[name] for name in ("body", "current")}
        monkeypatch.setattr(Stream, "_part", counting)
        for start, end, bins in windows():
            first, last = np.searchsorted(tick.astype(np.int64), [start, end])
            most = max(16 * bins, overview.FEWEST_BINS) + 2
            for name, values in columns.items():
                read = 0
                at_s, low, high = board.overview(name, start, end, bins)
                if last <= first:
                    assert len(at_s) == len(low) == len(high) == 0
                    continue
                rows = np.searchsorted(time_s, at_s)  # the first row of each bin
                np.testing.assert_array_equal(time_s[rows], at_s)
                size = int(rows[1] - rows[0]) if len(rows) > 1 else overview.coarsest([16], first, last, bins)
                assert min(bins, last - first) <= len(at_s) <= most
                ends = np.append(rows[1:], min(rows[-1] + size, len(tick)))
                assert rows[0] <= first and ends[-1] >= last and rows[0] % size == 0
                for k in (0, len(rows) // 2, len(rows) - 1):
                    part = values[rows[k] : ends[k]]
                    assert (low[k], high[k]) == (part.min(), part.max())
                if kept == "all":
                    assert read <= most + 2
        with pytest.raises(KeyError):
            board.overview("nonsense", 0, 10, 10)
        with pytest.raises(ValueError, match="one bin"):
            board.overview("body", 0, 10, 0)


def test_the_file_holds_what_it_says(session: Path) -> None:
    with h5py.File(session) as file:
        assert sorted(file["overview/board"]) == ["body", "crank", "current", "voltage"]
        for name, levels in file["overview/board"].items():
            assert list(levels) == ["16", "256"]
            for size, bins in levels.items():
                np.testing.assert_array_equal(bins[:], by_hand(file["streams/board"][name][:], int(size)))


@pytest.mark.parametrize("bins", [np.zeros((10, 2), dtype="i4"), np.zeros((4313, 2)), np.zeros(8626, "i4")])
def test_an_overview_of_another_shape_is_damage(session: Path, tmp_path: Path, bins: np.ndarray) -> None:
    copy = tmp_path / "b.h5"
    copy.write_bytes(session.read_bytes())
    with h5py.File(copy, "r+") as file:
        del file["overview/board/body/16"]
        file["overview/board/body/16"] = bins
    with open_session(copy) as opened:
        board = opened.streams["board"]
        board.overview("body", 0, 10**9, 100)  # from the coarser one, which is good
        with pytest.raises(Damaged, match="/overview/board/body/16 does not belong"):
            board.overview("body", 0, 10**9, 2000)
