"""Appending to a journal: from several threads, and cut short at the worst moment."""

from __future__ import annotations

import threading
from pathlib import Path

import pytest
from small_journal import ROWS, frame, header

from rig.events import Event
from rig.record import journal as jn
from rig.record.errors import JournalFailure
from rig.record.journal import JournalWriter
from rig.record.sealing import read_recording


def test_several_threads_may_append(tmp_path: Path) -> None:
    path = tmp_path / "a.journal"
    writer = JournalWriter(path, header())

    def append(who: int) -> None:
        for number in range(500):
            writer.event(Event(number, "mark", {"text": str(who)}))

    threads = [threading.Thread(target=append, args=(who,)) for who in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    writer.close()
    found = read_recording(path)
    assert found.ended and len(found.events) == 2000
    for who in range(4):
        assert [event.tick for event in found.events if event.data["text"] == str(who)] == list(range(500))


def test_an_interrupt_within_an_append_leaves_no_gap(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A second Ctrl-C may fall anywhere; the events of the halt come after it and must be readable."""
    path = tmp_path / "a.journal"
    writer = JournalWriter(path, header())
    writer.frame(frame(0))
    encode = jn.encode

    def interrupted(kind: int, sequence: int, payload: bytes) -> bytes:
        raise KeyboardInterrupt

    monkeypatch.setattr(jn, "encode", interrupted)
    with pytest.raises(KeyboardInterrupt):
        writer.frame(frame(1))
    monkeypatch.setattr(jn, "encode", encode)
    writer.event(Event(1, "halt"))
    writer.close()
    found = read_recording(path)
    assert found.ended and [event.kind for event in found.events] == ["halt"] and len(found.raw) == ROWS


def test_a_record_nobody_could_read_is_not_taken(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(jn, "LONGEST", 100_000)
    path = tmp_path / "a.journal"
    writer = JournalWriter(path, header())
    with pytest.raises(JournalFailure, match="takes no record"):
        writer.result({"text": "x" * 200_000})
    writer.result({"text": "x"})
    writer.close()
    assert read_recording(path).ended
