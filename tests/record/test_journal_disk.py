"""The journal on disks that block, fill up, fail or take little: the loop never waits, and nothing is half believed."""

from __future__ import annotations

import contextlib
import errno
import os
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from small_journal import ROWS, frame, header

from rig.events import Event
from rig.record import journal as jn
from rig.record.durability import OsDisk, WriteBehind
from rig.record.errors import JournalFailure, NameTaken
from rig.record.journal import Journal, JournalWriter
from rig.record.sealing import read_recording

PATIENCE_S = 20.0


def writers() -> list[threading.Thread]:
    return [thread for thread in threading.enumerate() if thread.name == "journal writer"]


@pytest.fixture(autouse=True)
def no_thread_is_left() -> Iterator[None]:
    yield
    assert writers() == []


class StuckDisk(OsDisk):
    """Blocks in the calls named, from `stick` until `let_go`."""

    def __init__(self, *calls: str) -> None:
        self.calls = calls
        self.inside = threading.Event()
        self.free_again = threading.Event()
        self.free_again.set()

    def stick(self) -> None:
        self.inside.clear()
        self.free_again.clear()

    def let_go(self) -> None:
        self.free_again.set()

    def _perhaps(self, call: str) -> None:
        if call in self.calls and not self.free_again.is_set():
            self.inside.set()
            assert self.free_again.wait(PATIENCE_S)

    def write(self, descriptor: int, data: bytes) -> int:
        self._perhaps("write")
        return super().write(descriptor, data)

    def sync(self, descriptor: int) -> None:
        self._perhaps("sync")
        super().sync(descriptor)

    def free_bytes(self, folder: Path) -> int:
        self._perhaps("free_bytes")
        return super().free_bytes(folder)


@pytest.mark.parametrize("call", ["write", "sync", "free_bytes"])
def test_a_disk_that_blocks_delays_no_frame(
    tmp_path: Path, call: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Frames are taken while the disk is inside the call and cannot come out before they were."""
    monkeypatch.setattr(WriteBehind, "LOOK_S", 0.0)
    path, disk = tmp_path / "a.journal", StuckDisk(call)
    writer = JournalWriter(path, header(), disk=disk)
    disk.stick()
    writer.frame(frame(0))
    assert disk.inside.wait(PATIENCE_S)
    for number in range(1, 300):
        writer.frame(frame(number))
        writer.event(Event(number, "mark"))
    assert not disk.free_again.is_set()
    if call != "free_bytes":
        assert writer.committed < 300 * ROWS * 16  # the rows are not there yet, and nobody says so
    disk.let_go()
    writer.close()
    found = read_recording(path)
    assert found.ended and not found.damage and len(found.raw) == 300 * ROWS and len(found.events) == 299


def test_flush_waits_for_the_operating_system(tmp_path: Path) -> None:
    path, disk = tmp_path / "a.journal", StuckDisk("write")
    writer = JournalWriter(path, header(), disk=disk)
    disk.stick()
    writer.frame(frame(0))
    done = threading.Event()
    waiting = threading.Thread(target=lambda: (writer.flush(), done.set()))
    waiting.start()
    assert disk.inside.wait(PATIENCE_S) and not done.is_set()
    disk.let_go()
    waiting.join()
    assert done.is_set() and path.stat().st_size == writer.written
    assert [record.kind for record in Journal(path)] == [jn.HEADER, jn.FRAME]
    writer.close()


def test_a_backlog_has_an_end(tmp_path: Path) -> None:
    """Too slow a disk ends the run in a sentence, with bounded memory; what was taken is written all the same."""
    path, disk = tmp_path / "a.journal", StuckDisk("write")
    writer = JournalWriter(path, header(), disk=disk, backlog_bytes=1_000_000)
    disk.stick()
    taken = 0
    with pytest.raises(JournalFailure) as caught:
        while taken < 100_000:
            writer.frame(frame(taken))
            taken += 1
    assert str(caught.value) == f"{path} cannot be written: the disk is too slow: 1 MB wait to be written"
    record_bytes = len(jn.encode(jn.FRAME, 0, frame(0).pack()))
    assert 1_000_000 <= taken * record_bytes <= 1_000_000 + 2 * record_bytes
    for act in (lambda: writer.frame(frame(taken)), writer.flush, lambda: writer.event(Event(1, "mark"))):
        with pytest.raises(JournalFailure, match="too slow"):
            act()
    disk.let_go()
    writer.close(ended=False)
    found = read_recording(path)
    assert len(found.raw) == taken * ROWS and not found.ended and not found.damage


class ShortDisk(OsDisk):
    """Takes no more than 7 bytes in one call."""

    def write(self, descriptor: int, data: bytes) -> int:
        return super().write(descriptor, data[:7])


def fill(path: Path, **options: object) -> bytes:
    writer = JournalWriter(path, header(), **options)  # type: ignore[arg-type]
    for number in range(50):
        writer.frame(frame(number))
        if number % 10 == 3:
            writer.losses(number, 1, 0)
            writer.event(Event(number, "mark", {"text": "µ"}))
    writer.result({"which": "final", "levels": []})
    writer.close()
    assert writer.committed == writer.written == path.stat().st_size
    assert writer.committed_sequence == sum(1 for _ in Journal(path)) - 1
    return path.read_bytes()


def test_a_disk_that_takes_little_at_a_time(tmp_path: Path) -> None:
    assert fill(tmp_path / "a.journal", disk=ShortDisk()) == fill(tmp_path / "b.journal")


class FullDisk(OsDisk):
    """Takes `room` bytes, the last of them in a short count, and then fails as a full disk does."""

    def __init__(self, room: int) -> None:
        self.room = room
        self.syncs = 0

    def write(self, descriptor: int, data: bytes) -> int:
        if self.room <= 0:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        sent = super().write(descriptor, data[: self.room])
        self.room -= sent
        return sent

    def sync(self, descriptor: int) -> None:
        self.syncs += 1
        super().sync(descriptor)


def until_refused(writer: JournalWriter, numbers: Iterator[int]) -> str:
    """Append frames until one is refused; the sentence."""
    deadline_s = time.monotonic() + PATIENCE_S
    for number in numbers:
        try:
            writer.frame(frame(number))
        except JournalFailure as error:
            return str(error)
        time.sleep(0.001)
        assert time.monotonic() < deadline_s
    raise AssertionError("the numbers ran out")


@pytest.mark.parametrize("room", [20_000, 20_001, 20_050, 23_456])
def test_full_midway(tmp_path: Path, room: int) -> None:
    """The next append after the disk is full is refused; rows on it are good, and synced."""
    path, disk = tmp_path / "a.journal", FullDisk(room)
    writer = JournalWriter(path, header(), disk=disk)
    assert "No space left" in until_refused(writer, iter(range(10_000)))
    with pytest.raises(JournalFailure, match="No space left"):
        writer.close()
    assert path.stat().st_size == room == writer.written == writer.committed
    assert disk.syncs
    found = read_recording(path)
    whole = np.concatenate([frame(k).raw for k in range(10_000)])
    assert len(found.raw) > 10 * ROWS and not found.ended
    np.testing.assert_array_equal(found.raw, whole[: len(found.raw)])
    assert writer.committed_sequence <= sum(1 for _ in Journal(path)) - 1


class FailingSync(OsDisk):
    def __init__(self, good: int) -> None:
        self.good = good
        self.calls = 0

    def sync(self, descriptor: int) -> None:
        self.calls += 1
        if self.calls > self.good:
            raise OSError(errno.EIO, os.strerror(errno.EIO))
        super().sync(descriptor)


def test_after_a_sync_error_nothing_is_taken_or_told_as_committed(tmp_path: Path) -> None:
    """A second sync may succeed although the first one's pages are gone: it is not tried."""
    path, disk = tmp_path / "a.journal", FailingSync(good=1)
    writer = JournalWriter(path, header(), disk=disk)
    assert "Input/output error" in until_refused(writer, iter(range(100_000)))
    committed = writer.committed
    assert 0 < committed < writer.written
    with pytest.raises(JournalFailure, match="Input/output"):
        writer.flush()
    writer.close(ended=False)
    assert writer.committed == committed and disk.calls == 2
    assert not read_recording(path).damage


def test_a_sync_that_fails_at_the_very_end_is_told(tmp_path: Path) -> None:
    writer = JournalWriter(tmp_path / "a.journal", header(), disk=FailingSync(good=0))
    with pytest.raises(JournalFailure, match="Input/output"):
        writer.close()
    writer.close()


class OddDisk(OsDisk):
    """Fails as no disk should, but a program might."""

    def __init__(self, failure: Exception | None) -> None:
        self.failure = failure
        self.calls = 0

    def write(self, descriptor: int, data: bytes) -> int:
        self.calls += 1
        if self.calls == 1:
            return super().write(descriptor, data)
        if self.failure is not None:
            raise self.failure
        return 0


@pytest.mark.parametrize(
    ("failure", "words"),
    [(None, "takes nothing"), (ValueError("odd"), "odd"), (MemoryError(), "MemoryError"),
     (OSError("plain"), "plain")],
)  # fmt: skip
def test_whatever_ends_the_writing_is_told_and_nobody_waits_for_ever(
    tmp_path: Path, failure: Exception | None, words: str
) -> None:
    writer = JournalWriter(tmp_path / "a.journal", header(), disk=OddDisk(failure))
    writer.frame(frame(0))
    with pytest.raises(JournalFailure, match=words):
        writer.flush()
    writer.close(ended=False)


def test_a_failed_writer_closes(tmp_path: Path) -> None:
    writer = JournalWriter(tmp_path / "a.journal", header(), disk=FullDisk(20_000))
    until_refused(writer, iter(range(10_000)))
    descriptor = writer._descriptor
    writer.close(ended=False)
    with pytest.raises(OSError, match="Bad file descriptor"):
        os.fstat(descriptor)
    with pytest.raises(JournalFailure, match="closed"):
        writer.frame(frame(0))


def test_a_journal_without_room_for_its_header_is_not_left_behind(tmp_path: Path) -> None:
    opened = Path("/proc/self/fd")
    before = len(list(opened.iterdir())) if opened.is_dir() else 0
    with pytest.raises(JournalFailure, match="No space left"):
        JournalWriter(tmp_path / "a.journal", header(), disk=FullDisk(100))
    with pytest.raises(ValueError, match="JSON"):
        JournalWriter(tmp_path / "a.journal", {"seed": float("nan")})
    assert list(tmp_path.iterdir()) == []
    if before:
        assert len(list(opened.iterdir())) == before
    JournalWriter(tmp_path / "a.journal", header()).close()


def test_two_writers_on_one_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "a.journal"
    with contextlib.closing(JournalWriter(path, header())):
        with pytest.raises(NameTaken, match="there already"):
            JournalWriter(path, header())
        with pytest.raises(NameTaken, match="there already"):
            JournalWriter(tmp_path / "." / "a.journal", header())
    # Another command that takes the file between its creation and its lock has it.
    monkeypatch.setattr(jn, "lock", lambda _: False)
    with pytest.raises(NameTaken, match="there already"):
        JournalWriter(tmp_path / "b.journal", header())


def test_folders_that_take_no_file(tmp_path: Path) -> None:
    """These hold for root too, whom no permission stops."""
    (tmp_path / "file").write_text("no folder", encoding="utf-8")
    for path in (
        tmp_path / "file" / "a.journal",
        tmp_path / "none" / "a.journal",
        tmp_path / ("a" * 300 + ".journal"),
    ):
        with pytest.raises(JournalFailure, match="cannot be created") as caught:
            JournalWriter(path, header())
        assert str(path) in str(caught.value) and "\n" not in str(caught.value)


@pytest.mark.parametrize("number", [errno.EACCES, errno.EROFS])
def test_a_read_only_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int) -> None:
    def refuse(*_: object) -> int:
        raise OSError(number, os.strerror(number))

    monkeypatch.setattr(jn.os, "open", refuse)
    with pytest.raises(JournalFailure, match=f"cannot be created: {os.strerror(number)}"):
        JournalWriter(tmp_path / "a.journal", header())


def test_a_wall_clock_set_back_changes_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    whole = fill(tmp_path / "a.journal")
    now = [2e9]

    def back() -> float:
        now[0] -= 1e6
        return now[0]

    monkeypatch.setattr(time, "time", back)
    monkeypatch.setattr(time, "time_ns", lambda: int(1e9 * back()))
    assert fill(tmp_path / "b.journal") == whole
    writer = JournalWriter(tmp_path / "c.journal", header())
    deadline_s = time.monotonic() + PATIENCE_S
    while writer.committed < writer.written and time.monotonic() < deadline_s:
        time.sleep(0.01)
    assert writer.committed == writer.written > 0
    writer.close()


def test_with_nothing_to_do_the_thread_sleeps(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    turns = []
    turn = WriteBehind._turn
    monkeypatch.setattr(WriteBehind, "_turn", lambda self: (turns.append(1), turn(self))[1])
    writer = JournalWriter(tmp_path / "a.journal", header())
    deadline_s = time.monotonic() + PATIENCE_S
    while not writer._behind._asleep and time.monotonic() < deadline_s:
        time.sleep(0.01)
    assert writer._behind._asleep and writer.committed == writer.written
    before = len(turns)
    time.sleep(10 * WriteBehind.WRITE_S)
    assert len(turns) == before
    writer.frame(frame(0))
    writer.flush()  # it wakes up
    writer.close()
