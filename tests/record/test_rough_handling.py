"""Journals and sessions under rough handling: dead writers, two hands on one file, killed sealing, crafted bytes."""

from __future__ import annotations

import errno
import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from small_journal import ROWS, frame, header, write

from drivers.rows import RowFrame
from rig.events import Event
from rig.record import journal as jn
from rig.record.amendment import write_results
from rig.record.durability import OsDisk
from rig.record.errors import Damaged, JournalFailure, NameTaken
from rig.record.journal import JournalWriter
from rig.record.sealing import read_recording, seal
from rig.session import open_session


class Hiccup(OsDisk):
    """Tears the second write in half, then works again: the meanest kind of full disk."""

    def __init__(self) -> None:
        self.writes = 0

    def write(self, descriptor: int, data: bytes) -> int:
        self.writes += 1
        if self.writes == 2:
            return super().write(descriptor, data[: len(data) // 2])
        if self.writes == 3:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        return super().write(descriptor, data)


def test_after_a_failure_nothing_more_is_taken(tmp_path: Path) -> None:
    """A record behind a torn one could never be read, so taking it would be a lie."""
    path = tmp_path / "a.journal"
    writer = JournalWriter(path, header(), disk=Hiccup())
    for number in range(10):
        writer.frame(frame(number))
    with pytest.raises(JournalFailure):
        writer.flush()
    length = path.stat().st_size
    for act in (
        lambda: writer.frame(frame(10)),
        lambda: writer.event(Event(1, "mark")),
        lambda: writer.flush(),
    ):
        with pytest.raises(JournalFailure, match="No space left"):
            act()
    with pytest.raises(JournalFailure):
        writer.close()
    writer.close()  # again: nothing
    assert path.stat().st_size == length
    found = read_recording(path)
    assert 0 < len(found.raw) < 10 * ROWS and not found.ended
    np.testing.assert_array_equal(
        found.raw, np.concatenate([frame(k).raw for k in range(10)])[: len(found.raw)]
    )


def test_a_journal_in_use_is_not_sealed(tmp_path: Path) -> None:
    writer = JournalWriter(tmp_path / "a.journal", header())
    writer.frame(frame(0))
    writer.flush()
    with pytest.raises(NameTaken, match="still being written"):
        seal(tmp_path / "a.journal", tmp_path / "a.h5")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.journal"]
    writer.close()
    seal(tmp_path / "a.journal", tmp_path / "a.h5")


def append(path: Path, kind: int, payload: bytes) -> None:
    """A record with a right checksum and any content, as only a program's mistake could write it."""
    sequence = sum(1 for _ in jn.Journal(path))
    with path.open("ab") as file:
        file.write(jn.encode(kind, sequence, payload))


CRAFTED = {
    "event of text": (jn.EVENT, b"hello"),
    "event without a tick": (jn.EVENT, b'{"kind": "mark"}'),
    "event that is a list": (jn.EVENT, b"[1, 2]"),
    "event with a tick in words": (jn.EVENT, b'{"tick": "soon", "kind": "mark"}'),
    "event before the beginning": (jn.EVENT, b'{"tick": -1, "kind": "mark"}'),
    "event after the end of time": (jn.EVENT, b'{"tick": 1e999, "kind": "mark"}'),
    "event beyond 64 bits": (jn.EVENT, b'{"tick": 18446744073709551616, "kind": "mark"}'),
    "level at no drive": (jn.EVENT, b'{"tick": 5, "kind": "level", "level": 1, "direction": "rising"}'),
    "event not in UTF-8": (jn.EVENT, b"\xff\xfe{}"),
    "result of text": (jn.RESULT, b"{"),
    "short frame": (jn.FRAME, b"abc"),
    "frame of two channels": (jn.FRAME, RowFrame(4, 0, 1000, 20, 0, 0, np.zeros((5, 2), np.int32)).pack()),
    "frame that came before": (jn.FRAME, frame(1).pack()),
}


@pytest.mark.parametrize("what", CRAFTED)
def test_nonsense_with_a_right_checksum_ends_the_recording_there(tmp_path: Path, what: str) -> None:
    path = tmp_path / "a.journal"
    write(path, 4, ended=False)
    append(path, *CRAFTED[what])
    found = seal(path, tmp_path / "a.h5", keep_journal=True)
    assert found.damage and "record" in found.damage
    with open_session(tmp_path / "a.h5") as session:
        assert len(session.streams["board"]) == 4 * ROWS


@pytest.mark.parametrize("text", [b"[]", b"{", b'{"channels": 3}', b'{"channels": [{"name": 1}]}', b"{}"])
def test_a_header_of_nonsense_is_damage(tmp_path: Path, text: bytes) -> None:
    path = tmp_path / "a.journal"
    path.write_bytes(jn.MAGIC + jn.encode(jn.HEADER, 0, text))
    with pytest.raises(Damaged) as caught:
        seal(path, tmp_path / "a.h5")
    assert str(path) in str(caught.value) and path.exists()


def changed(**fields: Any) -> dict[str, Any]:
    return {**header(), **fields}


def channel(**fields: Any) -> dict[str, Any]:
    channels = header()["channels"]
    return changed(channels=[{**channels[0], **fields}, *channels[1:]])


HEADERS = {
    "no time base": changed(tick_hz=None),
    "a time base of 0": changed(tick_hz=0),
    "frames of text": changed(frame_rows="x"),
    "calibrations in a list": changed(calibrations=[1]),
    "a channel called tick": channel(name="tick"),
    "a channel with a path": channel(name="../body"),
    "a channel twice": channel(name="crank"),
    "a channel without a name": channel(name=""),
    "a scale in words": channel(scale="x"),
    "a scale beyond all numbers": channel(scale=10**400),
    "a unit that is a number": channel(unit=3),
}


@pytest.mark.parametrize("what", HEADERS)
def test_a_header_no_session_can_be_made_of(tmp_path: Path, what: str) -> None:
    """Told before the journal is touched: a session that nobody can open is no reason to delete it."""
    path = tmp_path / "a.journal"
    path.write_bytes(jn.MAGIC + jn.encode(jn.HEADER, 0, jn.to_json(HEADERS[what])))
    append(path, jn.FRAME, frame(0).pack())
    with pytest.raises(Damaged, match="the journal's header") as caught:
        seal(path, tmp_path / "a.h5")
    assert str(path) in str(caught.value)
    assert [one.name for one in tmp_path.iterdir()] == ["a.journal"]


SEALING = """
import sys
from pathlib import Path
from rig.record import sealing
def slowly(*_):
    print("written", flush=True)
    import time
    time.sleep(60)
sealing._compare = slowly
sealing.seal(Path(sys.argv[1]), Path(sys.argv[2]))
"""


def test_sealing_killed_before_its_end(tmp_path: Path) -> None:
    """No half session under the final name, the journal whole, and the next attempt clears away the rest."""
    journal, session = tmp_path / "a.journal", tmp_path / "a.h5"
    write(journal, 5)
    words = [sys.executable, "-c", SEALING, str(journal), str(session)]
    process = subprocess.Popen(words, stdout=subprocess.PIPE, text=True)
    assert process.stdout is not None
    assert process.stdout.readline().strip() == "written"
    os.kill(process.pid, signal.SIGKILL)
    process.communicate()
    assert not session.exists() and journal.exists()
    seal(journal, session)
    assert [path.name for path in tmp_path.iterdir()] == ["a.h5"]
    with open_session(session) as opened:
        assert len(opened.streams["board"]) == 5 * ROWS


def test_sealing_twice_gives_the_same_rows_and_events(tmp_path: Path) -> None:
    write(tmp_path / "a.journal", 5, ended=False)
    for name in ("one.h5", "two.h5"):
        seal(tmp_path / "a.journal", tmp_path / name, keep_journal=True)
    with open_session(tmp_path / "one.h5") as one, open_session(tmp_path / "two.h5") as two:
        assert one.events == two.events
        np.testing.assert_array_equal(one.streams["board"].tick, two.streams["board"].tick)


def test_blocks_end_where_the_status_changes_or_rows_were_lost(tmp_path: Path) -> None:
    path = tmp_path / "a.journal"
    writer = JournalWriter(path, header())
    for number, status in ((0, 1), (1, 1), (2, 3), (3, 3), (6, 3), (7, 1)):  # 4 and 5 never came
        whole = frame(number)
        writer.frame(
            RowFrame(whole.sequence, whole.tick, whole.period, whole.first_row, status, 0, whole.raw)
        )
    writer.close()
    seal(path, tmp_path / "a.h5")
    with open_session(tmp_path / "a.h5") as session:
        board = session.streams["board"]
        blocks = list(board.blocks(1000))
        assert [(len(b), b.status, b.lost_rows, b.lost_frames) for b in blocks] == [
            (2 * ROWS, 1, 0, 0), (2 * ROWS, 3, 0, 0), (ROWS, 3, 2 * ROWS, 2), (ROWS, 1, 0, 0)
        ]  # fmt: skip
        for size in (1, 3, 5, 7):
            small = list(board.blocks(size))
            assert max(len(b) for b in small) <= size
            np.testing.assert_array_equal(np.concatenate([b.tick for b in small]), board.tick)
            assert sum(b.lost_rows for b in small) == 2 * ROWS
        with pytest.raises(ValueError, match="at least one row"):
            next(board.blocks(0))


def test_results_that_cannot_be_written_leave_the_session_as_it_was(tmp_path: Path) -> None:
    write(tmp_path / "a.journal", 3)
    session = tmp_path / "a.h5"
    seal(tmp_path / "a.journal", session)
    before = session.read_bytes()
    with pytest.raises(ValueError, match="JSON"):
        write_results(session, {"levels": float("nan")})
    assert session.read_bytes() == before
    other = tmp_path / "b.h5"
    other.write_bytes(b"nothing of the kind")
    with pytest.raises(Damaged):
        write_results(other, {})
    with pytest.raises(FileNotFoundError):
        write_results(tmp_path / "none.h5", {})
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.h5", "b.h5"]


def test_an_empty_recording_is_a_session_too(tmp_path: Path) -> None:
    JournalWriter(tmp_path / "a.journal", header()).close()
    seal(tmp_path / "a.journal", tmp_path / "a.h5")
    with open_session(tmp_path / "a.h5") as session:
        assert len(session.streams["board"]) == 0 and list(session.streams["board"].blocks(10)) == []
        assert session.events == [] and session.results["final"] is None


def test_what_is_committed_is_told(tmp_path: Path) -> None:
    writer = JournalWriter(tmp_path / "a.journal", header())
    writer.frame(frame(0))
    writer.flush()
    length = (tmp_path / "a.journal").stat().st_size
    deadline = time.monotonic() + 10.0
    while writer.committed < length and time.monotonic() < deadline:
        time.sleep(0.01)
    assert writer.committed == length
    writer.close()
    assert json.loads(json.dumps(header())) == jn.Journal(tmp_path / "a.journal").header
