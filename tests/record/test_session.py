"""Sealing and opening session files."""

from __future__ import annotations

import json
from pathlib import Path

import h5py
import numpy as np
import pytest
from small_journal import ROWS, frame, write

from rig.record import sealing
from rig.record.amendment import write_results
from rig.record.errors import Damaged, JournalFailure, NameTaken
from rig.session import open_session


@pytest.fixture
def session(tmp_path: Path) -> Path:
    write(tmp_path / "a.journal", 6)
    sealing.seal(tmp_path / "a.journal", tmp_path / "a.h5")
    return tmp_path / "a.h5"


def test_layout_with_h5py_alone(session: Path) -> None:
    whole = np.concatenate([frame(k).raw for k in range(6)])
    with h5py.File(session) as file:
        assert file.attrs["haltere_format"] == 1
        assert file.attrs["created_utc"].startswith("2026-01-01")
        board = file["streams/board"]
        assert board["tick"].dtype == np.uint64 and board["time_s"].dtype == np.float64
        for column, name in enumerate(("body", "crank", "current", "voltage")):
            data = board[name]
            assert data.dtype == np.int32
            np.testing.assert_array_equal(data[:], whole[:, column])
            assert set(data.attrs) >= {"unit", "scale", "offset", "calibration"}
        np.testing.assert_allclose(np.diff(board["time_s"][:]), 1e-3)
        assert json.loads(file["results/final"][()])["levels"] == []
        assert b"haltere_rig" in file["rig"][()] and b"haltere_protocol" in file["protocol"][()]
        assert len(file["events/tick"]) == 6
    assert list(session.parent.iterdir()) == [session]  # the journal went only after the check


def test_open_session(session: Path) -> None:
    with open_session(session) as opened:
        board = opened.streams["board"]
        assert len(board) == 6 * ROWS
        np.testing.assert_allclose(board["body"], board.raw("body") * 7.67e-4)
        assert board.unit("current") == "A"
        assert opened.rig.name == "boom" and opened.protocol.name == "quick"
        assert opened.events[2].data["text"] == "frame 2"
        for size in (1, 7, 1000):
            blocks = list(board.blocks(size))
            np.testing.assert_array_equal(
                np.concatenate([block.raw for block in blocks])[:, 0], board.raw("body")
            )
        with pytest.raises(KeyError):
            board["nonsense"]


def test_nothing_is_replaced(tmp_path: Path, session: Path) -> None:
    write(tmp_path / "b.journal", 2)
    before = session.read_bytes()
    with pytest.raises(NameTaken):
        sealing.seal(tmp_path / "b.journal", session)
    assert session.read_bytes() == before and (tmp_path / "b.journal").exists()


def test_interrupted_sealing_leaves_the_journal(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write(tmp_path / "a.journal", 3)

    def broken(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(sealing, "_compare", broken)
    with pytest.raises(JournalFailure, match="cannot be written: no space is left on the disk of "):
        sealing.seal(tmp_path / "a.journal", tmp_path / "a.h5")
    assert [path.name for path in tmp_path.iterdir()] == ["a.journal"]


def test_orphan_is_sealed(tmp_path: Path) -> None:
    write(tmp_path / "a.journal", 3, ended=False)
    recording = sealing.seal(tmp_path / "a.journal", tmp_path / "a.h5", keep_journal=True)
    assert not recording.ended
    with open_session(tmp_path / "a.h5") as opened:
        assert len(opened.streams["board"]) == 3 * ROWS


def test_results_are_rewritten_in_a_copy(session: Path) -> None:
    with open_session(session) as opened:
        before = opened.streams["board"].raw("body").copy()
    write_results(session, {"levels": [1]})
    with open_session(session) as opened:
        assert opened.results["final"] == {"levels": [1]}
        np.testing.assert_array_equal(opened.streams["board"].raw("body"), before)


def spoil(path: Path, how: str) -> None:
    with h5py.File(path, "r+") as file:
        if how == "external link":
            del file["streams/board/body"]
            file["streams/board/body"] = h5py.ExternalLink("/etc/passwd", "/x")
        elif how == "soft link":
            file["streams/board/more"] = h5py.SoftLink("/rig")
        elif how == "absurd shape":
            del file["streams/board/body"]
            file.create_dataset("streams/board/body", shape=(10**12,), dtype="i4", chunks=(1000,))
        elif how == "wrong type":
            del file["streams/board/tick"]
            file["streams/board/tick"] = np.array(["a", "b"], dtype="S1")
        elif how == "short column":
            del file["streams/board/time_s"]
            file["streams/board/time_s"] = np.zeros(3)
        elif how == "no events":
            del file["events"]
        elif how == "bad event":
            file["events/data"][0] = "{"
        elif how == "other format":
            file.attrs["haltere_format"] = 99
        elif how == "not ours":
            del file.attrs["haltere_format"]


@pytest.mark.parametrize(
    "how",
    ["external link", "soft link", "absurd shape", "wrong type", "short column", "no events", "bad event",
     "other format", "not ours"],
)  # fmt: skip
def test_spoiled_files_are_refused_in_a_sentence(session: Path, how: str) -> None:
    spoil(session, how)
    with pytest.raises(Damaged) as caught:
        open_session(session)
    assert "\n" not in str(caught.value)
    assert str(session) in str(caught.value)


def test_cut_off_files_are_refused(session: Path) -> None:
    data = session.read_bytes()
    for share in (0.0, 0.1, 0.5, 0.9):
        session.write_bytes(data[: int(share * len(data))])
        with pytest.raises(Damaged):
            open_session(session)
    with pytest.raises(FileNotFoundError):
        open_session(session.with_name("nothing.h5"))
