"""Digests in a session file: as documented, of everything, and honest after an amendment."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import h5py
import numpy as np
import pytest
from small_journal import header, write

from rig.record import digests
from rig.record.amendment import write_results
from rig.record.errors import Damaged
from rig.record.journal import JournalWriter
from rig.record.sealing import seal


@pytest.fixture
def session(tmp_path: Path) -> Path:
    write(tmp_path / "a.journal", 6)
    seal(tmp_path / "a.journal", tmp_path / "a.h5")
    return tmp_path / "a.h5"


def sha(data: bytes) -> str:
    return hashlib.sha256(data).hexdigest()


def test_digests_by_hand_from_the_documentation(session: Path) -> None:
    """hashlib and h5py alone. SHA-256 of "abc" is the published example of FIPS 180-4."""
    assert sha(b"abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    with h5py.File(session) as file:
        told = json.loads(file["digests"][()])
        names: list[str] = []
        file.visititems(
            lambda name, item: names.append(f"/{name}") if isinstance(item, h5py.Dataset) else None
        )
        assert set(told["datasets"]) == set(names) - {"/digests"}
        board = file["streams/board"]
        for name, kind in (("tick", "<u8"), ("time_s", "<f8"), ("status", "<u2"), ("body", "<i4")):
            assert told["datasets"][f"/streams/board/{name}"] == sha(board[name][:].astype(kind).tobytes())
        assert told["datasets"]["/rig"] == sha(file["rig"][()])
        assert told["datasets"]["/events/kind"] == sha(b"".join(k + b"\0" for k in file["events/kind"][:]))
        body = {
            name: value if isinstance(value, str) else value.item()
            for name, value in board["body"].attrs.items()
        }
        text = json.dumps(body, sort_keys=True, separators=(",", ":"))
        assert told["attributes"]["/streams/board/body"] == sha(text.encode())
        assert {"/", "/streams/board", "/results/final"} <= set(told["attributes"])


def test_what_stands_in_the_file_agrees(session: Path) -> None:
    with h5py.File(session) as file:
        assert digests.of_file(file) == digests.stored(file)


@pytest.mark.parametrize(
    ("place", "value"), [("streams/board/body", 1), ("events/tick", 3), ("losses/rows", None), ("rig", "x")]
)
def test_one_changed_value_changes_one_digest(session: Path, place: str, value: object) -> None:
    with h5py.File(session, "r+") as file:
        if value is None:
            del file[place]
            file[place] = np.array([3], dtype="u8")
        elif file[place].shape == ():
            file[place][()] = value
        else:
            file[place][2] = value
    with h5py.File(session) as file:
        told, found = digests.stored(file), digests.of_file(file)
    assert told is not None
    assert found["attributes"] == told["attributes"]
    assert {name for name in found["datasets"] if found["datasets"][name] != told["datasets"][name]} == {
        f"/{place}"
    }


def test_an_amendment_brings_its_own_digest_and_no_other(session: Path) -> None:
    with h5py.File(session, "r+") as file:
        file["streams/board/body"][3] += 1
    write_results(session, {"levels": [1]}, "haltere 9.9")
    with h5py.File(session) as file:
        told, found = digests.stored(file), digests.of_file(file)
        assert file["results/final"].attrs["software"] == "haltere 9.9"
    assert told is not None
    assert told["attributes"] == found["attributes"]
    assert [name for name in found["datasets"] if found["datasets"][name] != told["datasets"][name]] == [
        "/streams/board/body"  # damage from before is not made good
    ]


def test_a_session_from_before_there_were_digests_is_amended_without(session: Path) -> None:
    with h5py.File(session, "r+") as file:
        del file["digests"]
    write_results(session, {"levels": [1]})
    with h5py.File(session) as file:
        assert "digests" not in file and digests.stored(file) is None


@pytest.mark.parametrize("text", ["", "[]", "{}", '{"datasets": {}, "attributes": {"/": 3}}', "[" * 10**5])
def test_digests_that_are_none_are_damage(session: Path, text: str) -> None:
    with h5py.File(session, "r+") as file:
        file["digests"][()] = text
    before = session.read_bytes()
    with pytest.raises(Damaged, match="/digests"):
        write_results(session, {"levels": []})
    assert session.read_bytes() == before


def test_texts_in_any_language_and_an_empty_recording(tmp_path: Path) -> None:
    texts = {**header(), "calibrations": {"wägezelle": "µV/N, 2 Werte", "empty": ""}}
    JournalWriter(tmp_path / "a.journal", texts).close()
    seal(tmp_path / "a.journal", tmp_path / "a.h5")
    with h5py.File(tmp_path / "a.h5") as file:
        told = digests.stored(file)
        assert told == digests.of_file(file) and told is not None
        assert told["datasets"]["/calibrations/wägezelle"] == sha("µV/N, 2 Werte".encode())
        assert told["datasets"]["/streams/board/body"] == sha(b"")
