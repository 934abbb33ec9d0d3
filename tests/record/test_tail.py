"""Following a journal while it grows."""

from __future__ import annotations

import errno
import io
import os
import threading
import time
import tracemalloc
from pathlib import Path

import pytest
from small_journal import ROWS, frame, header, write

from rig.events import Event
from rig.record import journal as jn
from rig.record import tail as tl
from rig.record.errors import Damaged
from rig.record.journal import Journal, JournalWriter, Record
from rig.record.tail import JournalTail


@pytest.fixture
def whole(tmp_path: Path) -> bytes:
    """The bytes of a small journal, its header shortened so that every byte can be tried."""
    writer = JournalWriter(tmp_path / "whole", {"channels": []})
    for number in range(3):
        writer.event(Event(number, "mark", {"text": "here"}))
        writer.frame(frame(number))
    writer.close()
    return (tmp_path / "whole").read_bytes()


def test_growing_byte_by_byte(tmp_path: Path, whole: bytes) -> None:
    """Each record comes with its last byte, once, and never before."""
    path = tmp_path / "a.journal"
    path.touch()
    expected = {record.end: record for record in Journal(tmp_path / "whole")}
    with path.open("ab", buffering=0) as file, JournalTail(path) as tail:
        assert tail.poll() == []
        for length in range(1, len(whole) + 1):
            file.write(whole[length - 1 : length])
            assert tail.poll() == ([expected[length]] if length in expected else [])
            assert tail.poll() == []
        assert tail.ended and tail.offset == len(whole)


@pytest.mark.parametrize("size", [1, 3, 64, 1000, 10**6])
def test_the_pieces_make_no_difference(
    tmp_path: Path, whole: bytes, size: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(tl, "READ_BYTES", size)
    monkeypatch.setattr(tl, "POLL_BYTES", 4 * size)
    found: list[Record] = []
    with JournalTail(tmp_path / "whole") as tail:
        while more := tail.poll():
            found += more
        assert tail.ended
    assert found == list(Journal(tmp_path / "whole"))


def test_a_limit_told_by_the_writer(tmp_path: Path, whole: bytes) -> None:
    ends = [record.end for record in Journal(tmp_path / "whole")]
    with JournalTail(tmp_path / "whole") as tail:
        assert tail.poll(0) == [] and tail.poll(ends[0] - 1) == []
        assert [record.end for record in tail.poll(ends[0])] == ends[:1]
        assert [record.end for record in tail.poll(ends[2] + 5)] == ends[1:3]
        assert tail.poll(ends[1]) == []  # a limit behind what was read is no way back
        assert [record.end for record in tail.poll()] == ends[3:]


@pytest.mark.parametrize("limit", ["none", "written", "committed"])
def test_against_a_writer_at_work(tmp_path: Path, limit: str) -> None:
    path, count = tmp_path / "a.journal", 4000
    writer = JournalWriter(path, header())
    over = threading.Event()

    def record() -> None:
        for number in range(count):
            writer.frame(frame(number))
            if number % 50 == 0:
                writer.event(Event(number, "mark"))
                time.sleep(0.001)
        writer.close()
        over.set()

    thread = threading.Thread(target=record)
    thread.start()
    found: list[Record] = []
    polls = 0
    deadline_s = time.monotonic() + 60.0
    with JournalTail(path) as tail:
        while not tail.ended and time.monotonic() < deadline_s:
            bytes_ = None if limit == "none" else getattr(writer, limit)
            more = tail.poll(bytes_)
            assert bytes_ is None or not more or more[-1].end <= bytes_
            found += more
            polls += bool(more)
            if not more:
                over.wait(0.002)
    thread.join()
    assert tail.ended and polls > 1
    assert [record.sequence for record in found] == list(range(len(found)))
    assert sum(record.kind == jn.FRAME for record in found) == count
    assert found == list(Journal(path))


def test_damage_is_never_believed(tmp_path: Path, whole: bytes) -> None:
    """One flipped byte anywhere: the records before it, then Damaged, or nothing more where a length grew."""
    path = tmp_path / "a.journal"
    records = list(Journal(tmp_path / "whole"))
    waited = 0
    for place in range(len(whole)):
        broken = bytearray(whole)
        broken[place] ^= 0x15
        path.write_bytes(broken)
        good = [record for record in records if record.end <= place]
        with JournalTail(path) as tail:
            try:
                assert tail.poll() == good
                assert tail.poll() == []
                waited += 1
            except Damaged as error:
                assert str(path) in str(error) and "\n" not in str(error)
                with pytest.raises(Damaged):
                    tail.poll()
    assert 0 < waited < len(records) * 4  # only a length that points beyond the end looks like "not yet"


def test_a_wrong_sequence_is_damage(tmp_path: Path) -> None:
    path = tmp_path / "a.journal"
    one = jn.MAGIC + jn.encode(jn.HEADER, 0, b"{}")
    path.write_bytes(one + jn.encode(jn.EVENT, 2, b"{}"))
    with JournalTail(path) as tail:
        assert len(tail.poll()) == 1
        with pytest.raises(Damaged, match=f"damaged record head at byte {len(one)}"):
            tail.poll()


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"HLTRJNL\x02", "format this version does not read"),
        (b"\x89HDF\r\n\x1a\n", "not a Haltere journal"),
        (b"HLX", "not a Haltere journal"),
        (jn.MAGIC + jn.encode(jn.EVENT, 0, b"{}"), "no header"),
        (jn.MAGIC + jn.encode(1, 0, b"{}") + jn.encode(jn.END, 1, b"{}") + b"more", "after its end record"),
    ],
)
def test_files_that_are_no_journal(tmp_path: Path, data: bytes, words: str) -> None:
    path = tmp_path / "a.journal"
    path.write_bytes(data)
    with JournalTail(path) as tail, pytest.raises(Damaged, match=words):
        for _ in range(3):
            tail.poll()


def test_a_file_that_shrinks_is_damage(tmp_path: Path, whole: bytes) -> None:
    path = tmp_path / "a.journal"
    path.write_bytes(whole[:-5])
    with JournalTail(path) as tail:
        tail.poll()
        os.truncate(path, 20)
        with pytest.raises(Damaged, match="became shorter"):
            tail.poll()


def test_no_file_yet(tmp_path: Path) -> None:
    with pytest.raises(FileNotFoundError):
        JournalTail(tmp_path / "a.journal")


class BadSector:
    """An open file that cannot be read beyond its first two pieces."""

    def __init__(self, file: io.FileIO) -> None:
        self._file = file
        self._good = 2

    def read(self, size: int) -> bytes:
        if self._good == 0:
            raise OSError(errno.EIO, os.strerror(errno.EIO))
        self._good -= 1
        return self._file.read(size) or b""

    def __getattr__(self, name: str) -> object:
        return getattr(self._file, name)

    def __enter__(self) -> BadSector:
        return self

    def __exit__(self, *_: object) -> None:
        self._file.close()


def test_a_bad_sector_ends_the_reading_there(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "a.journal"
    write(path, 400)
    for module in (jn, tl):
        monkeypatch.setattr(module, "READ_BYTES", 20_000)
    book = Journal(path)
    real = Path.open
    monkeypatch.setattr(
        Path, "open", lambda self, *words, **options: BadSector(real(self, *words, **options))
    )
    found = [record for record in book if record.kind == jn.FRAME]
    assert 0 < len(found) < 400 and not book.ended
    assert book.damage == f"not readable after byte {book.good_bytes}: Input/output error"
    with JournalTail(path) as tail:
        assert [record for record in tail.poll() if record.kind == jn.FRAME] == found
        with pytest.raises(Damaged, match="cannot be read after byte"):
            tail.poll()


def test_a_long_journal_is_not_held_in_memory(tmp_path: Path) -> None:
    """60 MB of it pass through; held are the bytes of one poll at most, once as read and once as records."""
    path = tmp_path / "a.journal"
    path.write_bytes(jn.MAGIC + jn.encode(jn.HEADER, 0, b"{}"))
    with path.open("ab") as file:
        for number in range(60):
            file.write(jn.encode(jn.RESULT, number + 1, bytes(10**6)))
    tracemalloc.start()
    try:
        assert sum(1 for _ in Journal(path)) == 61
        with JournalTail(path) as tail:
            assert len(tail.poll()) < 20
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert peak < 40e6


def test_a_reader_that_stops_halfway_leaves_nothing_open(tmp_path: Path) -> None:
    """Warnings are errors here: a file left to the garbage collector would be one."""
    path = tmp_path / "a.journal"
    write(path, 5)
    assert next(iter(Journal(path))).kind == jn.HEADER
    for record in Journal(path):
        if record.kind == jn.FRAME:
            break
    assert len([record for record in Journal(path) if record.kind == jn.FRAME]) == 5
    book = Journal(path)
    assert list(book) == list(book) and book.ended and ROWS
