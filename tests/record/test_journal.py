"""The journal: its bytes, and what is left of it after any damage."""

from __future__ import annotations

import errno
import os
import signal
import struct
import subprocess
import sys
import time
import zlib
from pathlib import Path

import numpy as np
import pytest
from small_journal import ROWS, frame, header, write

from drivers.rows import RowFrame
from rig.record.durability import OsDisk
from rig.record.errors import Damaged, JournalFailure, NameTaken
from rig.record.journal import Journal, JournalWriter
from rig.record.sealing import read_recording


def test_bytes_are_as_documented(tmp_path: Path) -> None:
    """Parsed here from the documentation alone; CRC-32 of "123456789" is CBF43926 (published check value)."""
    assert zlib.crc32(b"123456789") == 0xCBF43926
    write(tmp_path / "a.journal", 2)
    data = (tmp_path / "a.journal").read_bytes()
    assert data[:8] == b"HLTRJNL\x01"
    offset, kinds = 8, []
    while offset < len(data):
        kind, length, sequence = struct.unpack_from("<BII", data, offset)
        (crc,) = struct.unpack_from("<I", data, offset + 9 + length)
        assert crc == zlib.crc32(data[offset : offset + 9 + length])
        assert sequence == len(kinds)
        kinds.append(kind)
        offset += 13 + length
    assert kinds == [1, 3, 2, 3, 2, 4, 6]


def good(found: np.ndarray, frames: int) -> bool:
    """Whether rows are a prefix of what was written, without a hole."""
    whole = np.concatenate([frame(k).raw for k in range(frames)])
    return len(found) % ROWS == 0 and np.array_equal(found, whole[: len(found)])


def test_every_length_gives_an_intact_prefix(tmp_path: Path) -> None:
    """Cut anywhere: no wrong row, no row lost that was whole."""
    path = tmp_path / "a.journal"
    write(path, 4)
    data = path.read_bytes()
    ends = {}
    for record in Journal(path):
        ends[record.end] = record.kind
    before = 0
    for length in range(len(data)):
        path.write_bytes(data[:length])
        complete = sum(kind == 2 and end <= length for end, kind in ends.items())
        try:
            found = read_recording(path)
        except Damaged:
            assert complete == 0
            continue
        assert len(found.raw) == complete * ROWS
        assert good(found.raw, 4)
        assert not found.ended
        before = max(before, len(found.raw))
    assert before == 4 * ROWS


def test_every_flipped_byte_costs_its_record_and_no_other(tmp_path: Path) -> None:
    """No wrong row, and all rows before and behind the damage."""
    path = tmp_path / "a.journal"
    write(path, 3)
    data = path.read_bytes()
    records = list(Journal(path))
    header_end = records[0].end
    whole = np.concatenate([frame(k).raw for k in range(3)])
    ticks = np.concatenate([frame(0).tick + (5 * k + np.arange(5)) * 1000 for k in range(3)])
    # The texts in the header are long and all alike: every 97th of their bytes will do.
    places = [*range(40), *range(40, header_end - 10, 97), *range(header_end - 10, len(data))]
    for place in places:
        for mask in (0x01, 0x55, 0x80):
            broken = bytearray(data)
            broken[place] ^= mask
            path.write_bytes(broken)
            try:
                found = read_recording(path)
            except Damaged as error:
                assert place < header_end
                assert str(path) in str(error) and "\n" not in str(error)
                continue
            assert place >= header_end
            hit = next(index for index, record in enumerate(records) if place < record.end)
            frames = [k for k in range(3) if hit != 2 + 2 * k]
            rows = np.concatenate([np.arange(5 * k, 5 * k + 5) for k in frames])
            np.testing.assert_array_equal(found.raw, whole[rows])
            np.testing.assert_array_equal(found.tick, ticks[rows])
            marks = [event.data["text"] for event in found.events if event.kind == "mark"]
            assert marks == [f"frame {k}" for k in range(3) if hit != 1 + 2 * k]
            unread = [index for index, event in enumerate(found.events) if event.kind == "unread"]
            last = hit == len(records) - 1
            assert found.damage and found.ended != last and found.recovery is not None
            # Told where an event or a row follows: behind the last frame there is none.
            assert len(unread) == (hit < len(records) - 3)
            lost = [loss[1:3] for loss in found.losses]
            assert lost == ([(ROWS, 1)] if hit in (4,) else [])
            assert (found.final is None) == (hit < len(records) - 1)


def test_ticks_are_unwrapped_and_losses_counted(tmp_path: Path) -> None:
    path = tmp_path / "a.journal"
    writer = JournalWriter(path, header())
    for number in (0, 1, 2, 5, 6):  # 3 and 4 never came
        writer.frame(frame(number))
    writer.close()
    found = read_recording(path)
    assert found.ended and not found.damage
    steps = np.diff(found.tick.astype(np.int64))
    assert sorted(set(steps.tolist())) == [1000, 11000]
    assert [loss[1:3] for loss in found.losses] == [(10, 2)]


def test_names_are_never_taken_twice(tmp_path: Path) -> None:
    path = tmp_path / "a.journal"
    first = JournalWriter(path, header())
    before = path.read_bytes()
    with pytest.raises(NameTaken, match="is there already"):
        JournalWriter(path, header())
    first.close()
    assert path.read_bytes().startswith(before)


class FullDisk(OsDisk):
    """A disk that takes `room` bytes and then fails as a full one does."""

    def __init__(self, room: int, *, at_sync: bool = False) -> None:
        self.room = room
        self.at_sync = at_sync

    def write(self, descriptor: int, data: bytes) -> int:
        if self.room <= 0:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        sent = super().write(descriptor, data[: self.room])
        self.room -= sent
        return sent

    def sync(self, descriptor: int) -> None:
        if self.at_sync:
            raise OSError(errno.EIO, os.strerror(errno.EIO))
        super().sync(descriptor)


def test_full_disk_keeps_what_is_good(tmp_path: Path) -> None:
    path = tmp_path / "a.journal"
    writer = JournalWriter(path, header(), disk=FullDisk(20_000))
    with pytest.raises(JournalFailure, match="No space left"):
        for number in range(500):
            writer.frame(frame(number))
            writer.flush()
    writer.close(ended=False)
    found = read_recording(path)
    assert len(found.raw) > 10 * ROWS
    assert good(found.raw, 500)


def test_failing_sync_stops_the_run(tmp_path: Path) -> None:
    writer = JournalWriter(tmp_path / "a.journal", header(), disk=FullDisk(10**9, at_sync=True))
    deadline = time.monotonic() + 10.0
    with pytest.raises(JournalFailure, match="cannot be written"):
        while time.monotonic() < deadline:
            writer.frame(frame(0))
            writer.flush()
            time.sleep(0.01)
    writer.close(ended=False)


def test_reserve_is_kept(tmp_path: Path) -> None:
    with pytest.raises(JournalFailure, match="reserve"):
        JournalWriter(tmp_path / "a.journal", header(), reserve_bytes=1e18)


SCRIPT = """
import sys, time
from pathlib import Path
sys.path.insert(0, sys.argv[2])
from small_journal import frame, header
from rig.record.journal import JournalWriter
writer = JournalWriter(Path(sys.argv[1]), header())
for number in range(10**9):
    writer.frame(frame(number))
    if number % 20 == 0:
        writer.flush()
        print(writer.committed, flush=True)
        time.sleep(0.002)
"""


@pytest.mark.parametrize("after_s", [0.05, 0.17, 0.31, 0.44])
def test_killed_writer(tmp_path: Path, after_s: float) -> None:
    """kill -9 at any time: rows contiguous, and nothing that was told as committed is missing."""
    path = tmp_path / "k.journal"
    words = [sys.executable, "-c", SCRIPT, str(path), str(Path(__file__).parent)]
    process = subprocess.Popen(words, stdout=subprocess.PIPE, text=True)
    assert process.stdout is not None
    process.stdout.readline()
    time.sleep(after_s)
    os.kill(process.pid, signal.SIGKILL)
    told = [int(line) for line in process.communicate()[0].splitlines() if line.strip()]
    book = Journal(path)
    list(book)
    assert book.good_bytes >= (told[-1] if told else 0)
    found = read_recording(path)
    assert len(found.raw) and good(found.raw, len(found.raw) // ROWS)
    assert not found.ended
    assert np.all(np.diff(found.tick.astype(np.int64)) == 1000)


def test_frame_round_trip() -> None:
    made = frame(7)
    again = RowFrame.unpack(made.pack())
    np.testing.assert_array_equal(again.raw, made.raw)
    assert (again.sequence, again.tick, again.first_row) == (made.sequence, made.tick, made.first_row)
