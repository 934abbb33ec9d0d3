"""The ring of bins: what it holds, what a reader in another process sees of it, and what it refuses."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from drivers.rows import RowBlock
from rig.bench import ring as rg
from rig.bench.ring import RingFailure, RingHeader, RingReader, RingWriter
from rig.record.errors import Damaged

NAMES = ("body", "crank", "load")
HZ = 1_000_000
PERIOD = 1000


def rows(first: int, count: int) -> tuple[np.ndarray, np.ndarray]:
    """Ticks and raw values of rows `first`...: every channel is a function of the tick, one rises, one falls."""
    number = np.arange(first, first + count)
    raw = np.stack([number, -2 * number, (number % 7) - 3], axis=1).astype(np.int32)
    return (number * PERIOD).astype(np.uint64), raw


def block(
    first: int, count: int, *, status: int = 1, overruns: int = 0, lost: tuple[int, int] = (0, 0)
) -> RowBlock:
    tick, raw = rows(first, count)
    return RowBlock(tick, raw, 0, status, overruns, *lost)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "ring"


def check(bins: np.ndarray, rows_per_bin: int) -> None:
    """Every bin is what its own rows make, and they follow each other."""
    for one in bins:
        count = int(one["rows"])
        assert 1 <= count <= rows_per_bin
        assert one["tick"] % PERIOD == 0
        _, raw = rows(int(one["tick"]) // PERIOD, count)
        np.testing.assert_array_equal(one["low"], raw.min(axis=0))
        np.testing.assert_array_equal(one["high"], raw.max(axis=0))
    assert np.all(np.diff(bins["number"].astype(np.int64)) == 1)


@pytest.mark.parametrize("rows_per_bin", [1, 3, 20, 64])
@pytest.mark.parametrize("size", [1, 7, 20, 1000])
def test_bins_are_the_same_however_rows_were_cut(path: Path, rows_per_bin: int, size: int) -> None:
    """Checked against plain minima and maxima of the rows."""
    writer = RingWriter(path, NAMES, HZ, rows_per_bin, 2048)
    for first in range(0, 2000, size):
        writer.add(block(first, min(size, 2000 - first)))
    reader = RingReader(path)
    assert len(reader.bins(10**6)) == 2000 // rows_per_bin  # the last one is not full
    writer.close()
    bins = reader.bins(10**6)
    check(bins, rows_per_bin)
    assert len(bins) == -(-2000 // rows_per_bin)
    assert bins["number"].tolist() == list(range(len(bins)))
    assert bins["tick"].tolist() == list(range(0, 2000 * PERIOD, rows_per_bin * PERIOD))
    assert bins["rows"].sum() == 2000 and bins["rows"][:-1].tolist() == [rows_per_bin] * (len(bins) - 1)
    assert set(bins["status"]) == {1} and not bins["lost_rows"].any()
    reader.close()


def test_the_ring_goes_round(path: Path) -> None:
    writer, reader = RingWriter(path, NAMES, HZ, 4, 10), RingReader(path)
    seen = 0
    for first in range(0, 4000, 8):
        writer.add(block(first, 8))
        done = first // 4 + 2
        bins = reader.bins(100)
        check(bins, 4)
        assert bins["number"].tolist() == list(range(max(0, done - 10), done))
        assert reader.bins(3)["number"].tolist() == list(range(max(0, done - 3), done))
        new = reader.bins(100, after=seen - 1)
        assert new["number"].tolist() == list(range(seen, done))
        seen = done
    assert len(reader.bins(0)) == 0 and len(reader.bins(5, after=10**6)) == 0
    writer.add(block(4000, 5000))  # more in one block than the ring holds
    check(reader.bins(10), 4)
    assert reader.bins(10)["number"].tolist() == list(range(2240, 2250))
    writer.close()
    reader.close()


def test_no_bin_spans_a_loss(path: Path) -> None:
    writer, reader = RingWriter(path, NAMES, HZ, 10, 100), RingReader(path)
    writer.add(block(0, 14, status=1, overruns=65_530))
    writer.add(block(20, 6, status=2, lost=(6, 1), overruns=4))  # the board's counter has gone round
    writer.add(block(26, 10, status=8, overruns=5))
    writer.close()
    bins = reader.bins(100)
    check(bins, 10)
    assert bins["tick"].tolist() == [0, 10 * PERIOD, 20 * PERIOD, 30 * PERIOD]
    assert bins["rows"].tolist() == [10, 4, 10, 6]
    assert bins["lost_rows"].tolist() == [0, 0, 6, 0]
    assert bins["status"].tolist() == [1, 1, 2 | 8, 8]
    header = reader.header()
    assert (header.rows, header.last_tick, header.closed) == (30, 35 * PERIOD, 1)
    assert (header.lost_rows, header.lost_frames, header.overruns) == (6, 1, 11)
    reader.close()


def test_the_header_tells_what_the_loop_knows(path: Path) -> None:
    writer, reader = RingWriter(path, NAMES, HZ, 10, 100), RingReader(path)
    assert reader.header() == RingHeader()
    assert (reader.names, reader.tick_hz, reader.rows_per_bin, reader.capacity) == (NAMES, HZ, 10, 100)
    for turn in range(30):
        writer.tell(
            committed_bytes=10 * turn, committed_sequence=turn - 1, heartbeat_tick=2**40 + turn, turns=turn
        )
        header = reader.header()
        assert (header.turns, header.committed_sequence, header.heartbeat_tick) == (
            turn,
            turn - 1,
            2**40 + turn,
        )
    writer.add(block(0, 5))
    assert reader.header().committed_bytes == 290 and reader.header().rows == 5
    writer.close()
    writer.close()
    reader.close()
    reader.close()


SCRIPT = """
import sys
from pathlib import Path
sys.path.insert(0, sys.argv[2])
import numpy as np
from drivers.rows import RowBlock
from rig.bench.ring import RingWriter
writer = RingWriter(Path(sys.argv[1]), ("body", "crank", "load"), 1_000_000, 4, 64)
print("made", flush=True)
number = np.arange(100_000)
raw = np.stack([number, -2 * number, (number % 7) - 3], axis=1).astype(np.int32)
tick = (number * 1000).astype(np.uint64)
step = np.array([1, -2, 0], np.int32)
first, count = 0, 84  # 21 bins of the 64 at a time; 84 is a multiple of 7, so that the third channel goes on
sizes = 84 * np.random.default_rng(1).integers(1, 3, 1000)
turn = 0
while first < 900_000_000:
    size = int(sizes[turn % 1000])
    shift = np.uint64(first * 1000)
    writer.tell(committed_bytes=first, committed_sequence=first, heartbeat_tick=first * 1000, turns=first)
    writer.add(RowBlock(tick[:size] + shift, raw[:size] + np.int32(first) * step, turn, 1))
    first += size
    turn += 1
"""


@pytest.fixture
def busy(path: Path) -> Iterator[subprocess.Popen[str]]:
    """Another process that writes a small ring as fast as it can; bins of four rows."""
    root = str(Path(rg.__file__).parents[2])
    process = subprocess.Popen(
        [sys.executable, "-c", SCRIPT, str(path), root], stdout=subprocess.PIPE, text=True
    )
    assert process.stdout is not None and process.stdout.readline().strip() == "made"
    yield process
    process.kill()
    process.communicate()


def quick_check(bins: np.ndarray) -> None:
    """As `check`, for many full bins at once."""
    first = bins["tick"].astype(np.int64) // PERIOD
    number = first[:, None] + np.arange(4)
    assert np.all(bins["rows"] == 4) and np.all(first == 4 * bins["number"].astype(np.int64))
    np.testing.assert_array_equal(
        bins["low"], np.stack([first, -2 * (first + 3), (number % 7).min(1) - 3], 1)
    )
    np.testing.assert_array_equal(bins["high"], np.stack([first + 3, -2 * first, (number % 7).max(1) - 3], 1))
    assert np.all(np.diff(bins["number"].astype(np.int64)) == 1)


def test_a_reader_beside_a_busy_writer_sees_whole_bins_only(path: Path, busy: subprocess.Popen[str]) -> None:
    """Asked for the whole ring each time, so that the writer overtakes the reader again and again."""
    reader = RingReader(path)
    reads = overtaken = last = 0
    deadline_s = time.monotonic() + 60.0
    while (reads < 3000 or overtaken < 100) and time.monotonic() < deadline_s:
        bins = reader.bins(64)
        quick_check(bins)
        reads += len(bins) > 0
        overtaken += len(bins) < 64 and bool(last)
        if len(bins):
            assert bins["number"][-1] >= last
            last = int(bins["number"][-1])
        header = reader.header()
        # The loop tells before the block is added, and the block is counted after it: one or two sizes apart.
        assert header.committed_bytes == header.committed_sequence == header.turns or header.turns == 0
        assert header.rows - header.turns in (0, 84, 168)
        assert header.heartbeat_tick == header.turns * PERIOD
    assert reads >= 3000 and overtaken >= 100
    reader.close()


def test_a_writer_killed_at_any_time_leaves_a_readable_ring(path: Path, busy: subprocess.Popen[str]) -> None:
    reader = RingReader(path)
    while len(reader.bins(64)) < 64 - 43:
        time.sleep(0.001)
    os.kill(busy.pid, signal.SIGKILL)
    busy.wait()
    bins = reader.bins(64)
    quick_check(bins)
    assert len(bins) >= 64 - 43  # but for those it was about to overwrite
    header = reader.header()
    assert header.rows - header.turns in (0, 84, 168) and not header.closed
    reader.close()
    again = RingReader(path)
    np.testing.assert_array_equal(again.bins(64), bins)
    again.close()


def test_bins_claimed_meanwhile_are_dropped(path: Path) -> None:
    """The moment after the copy, made to last: what may have been overwritten does not come out."""
    writer, reader = RingWriter(path, NAMES, HZ, 1, 16), RingReader(path)
    writer.add(block(0, 16))
    in_order, calls = reader._in_order, []

    def slow() -> None:
        in_order()
        calls.append(1)
        if len(calls) == 2:
            writer.add(block(16, 5))

    reader._in_order = slow  # type: ignore[method-assign]
    assert reader.bins(16)["number"].tolist() == list(range(5, 16))
    calls.clear()
    assert reader.header().rows == 21
    writer.close()
    reader.close()


def test_a_header_overtaken_is_read_again(path: Path) -> None:
    writer, reader = RingWriter(path, NAMES, HZ, 1, 16), RingReader(path)
    in_order, calls = reader._in_order, []

    def slow() -> None:
        in_order()
        calls.append(1)
        if len(calls) == 2:
            for turn in range(rg.HEADERS):
                writer.tell(committed_bytes=turn, committed_sequence=turn, heartbeat_tick=turn, turns=turn)

    reader._in_order = slow  # type: ignore[method-assign]
    assert reader.header().turns == rg.HEADERS - 1 and len(calls) == 4
    writer.close()
    reader.close()


def spoilt(data: bytearray, how: str) -> bytes:
    if how == "of a version":
        data[7] = 2
    elif how == "not a ring":
        data[:8] = b"HLTRJNL\x01"
    elif how == "cut off":
        del data[100:]
    elif how == "bytes, where its sizes make":
        del data[-1:]
    elif how == "impossible sizes":
        data[8:16] = bytes(8)
    elif how == "without readable channel names":
        data[8 + rg.SIZES.size] = 0xFF
    elif how == "with 4 names":
        place = 8 + rg.SIZES.size
        data[place : place + 25] = b'["a", "b", "c", "d"]     '
    return bytes(data)


@pytest.mark.parametrize(
    "how",
    ["of a version", "not a ring", "cut off", "bytes, where its sizes make", "impossible sizes",
     "without readable channel names", "with 4 names"],
)  # fmt: skip
def test_other_files_are_refused_in_a_sentence(path: Path, how: str) -> None:
    RingWriter(path, NAMES, HZ, 4, 100).close()
    path.write_bytes(spoilt(bytearray(path.read_bytes()), how))
    with pytest.raises(Damaged, match=how) as caught:
        RingReader(path)
    assert str(path) in str(caught.value) and "\n" not in str(caught.value)


def test_files_that_are_not_there_or_empty(path: Path) -> None:
    with pytest.raises(FileNotFoundError):
        RingReader(path)
    path.touch()
    with pytest.raises(Damaged, match="not a ring"):
        RingReader(path)


def test_a_ring_that_cannot_be_made(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path.write_text("precious", encoding="utf-8")
    with pytest.raises(RingFailure, match="there already"):
        RingWriter(path, NAMES, HZ, 4, 100)
    assert path.read_text(encoding="utf-8") == "precious"
    with pytest.raises(RingFailure, match="cannot be made"):
        RingWriter(path / "below", NAMES, HZ, 4, 100)
    other = path.with_name("other")
    for sizes in ((0, 100), (4, 1), (4, 10**9)):
        with pytest.raises(ValueError, match="no ring of"):
            RingWriter(other, NAMES, HZ, *sizes)
    with pytest.raises(ValueError, match="too long"):
        RingWriter(other, ["x" * 3000], HZ, 4, 100)

    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "posix_fallocate", full)
    with pytest.raises(RingFailure, match="No space left"):
        RingWriter(other, NAMES, HZ, 4, 100)
    assert [one.name for one in path.parent.iterdir()] == ["ring"]


def test_blocks_of_other_channels_are_refused(path: Path) -> None:
    writer = RingWriter(path, NAMES, HZ, 4, 100)
    with pytest.raises(ValueError, match="3 channels"):
        writer.add(RowBlock(np.arange(2, dtype=np.uint64), np.zeros((2, 4), np.int32)))
    writer.close()
