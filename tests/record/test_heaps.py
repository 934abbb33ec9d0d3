"""Texts in a session file are looked through before HDF5 reads them, which could go round in them for ever."""

from __future__ import annotations

import struct
import subprocess
import sys
import zlib
from pathlib import Path

import h5py
import pytest
from small_journal import write

from rig.record import heaps, inspection
from rig.record.amendment import write_results
from rig.record.errors import Damaged
from rig.record.heaps import damaged_heap
from rig.record.sealing import seal
from rig.session import open_session

#: Of a collection and of an object in it, written down again from the file format specification.
HEAD, OBJECT = 16, 16


@pytest.fixture
def session(tmp_path: Path) -> Path:
    write(tmp_path / "a.journal", 6)
    seal(tmp_path / "a.journal", tmp_path / "a.h5")
    return tmp_path / "a.h5"


def collections(data: bytes) -> list[int]:
    places, at = [], data.find(b"GCOL")
    while at >= 0:
        places.append(at)
        at = data.find(b"GCOL", at + 1)
    return places


def objects(data: bytes, place: int) -> list[int]:
    """Where the objects of a collection begin."""
    (size,) = struct.unpack_from("<Q", data, place + 8)
    found, at = [], place + HEAD
    while place + size - at >= OBJECT:
        found.append(at)
        index, length = struct.unpack_from("<H6xQ", data, at)
        at += length if index == 0 else OBJECT + -(-length // 8) * 8
    assert place + size - at in range(OBJECT)
    return found


def test_collections_are_as_specified_and_sound(session: Path) -> None:
    data = session.read_bytes()
    places = collections(data)
    assert len(places) >= 2 and all(objects(data, place) for place in places)
    assert damaged_heap(session) is None


@pytest.mark.parametrize("size", [0, 8, 2**62, 2**64 - 16])
def test_free_space_and_objects_of_absurd_size(session: Path, size: int) -> None:
    """Free space of no size: this is what HDF5 would not come back from."""
    data = session.read_bytes()
    place = collections(data)[0]
    for at in objects(data, place):
        index = struct.unpack_from("<H", data, at)[0]
        if index and size < 100:
            continue  # a shorter text is for the digests
        broken = bytearray(data)
        struct.pack_into("<Q", broken, at + 8, size)
        session.write_bytes(broken)
        assert damaged_heap(session) == place
        with pytest.raises(Damaged, match=f"texts kept from byte {place} on"):
            open_session(session)
    session.write_bytes(data)
    open_session(session).close()


@pytest.mark.parametrize("size", [0, 4095, 2**40])
def test_collections_of_absurd_size(session: Path, size: int) -> None:
    data = bytearray(session.read_bytes())
    place = collections(data)[-1]
    struct.pack_into("<Q", data, place + 8, size)
    session.write_bytes(data)
    assert damaged_heap(session) == place


def test_a_signature_across_two_readings_is_found(session: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    data = session.read_bytes()
    places = collections(data)
    with session.open("rb") as file:
        for size in (5, *range(places[1] + 1, places[1] + 10)):
            monkeypatch.setattr(heaps, "READ_BYTES", size)
            assert heaps._collections(file, 0, len(data)) == places
            assert heaps._collections(file, places[0] + 1, places[-1] + 7) == places[1:-1]
            assert heaps._collections(file, places[0], places[-1] + 8) == places


def test_only_what_lies_between_columns_is_read() -> None:
    assert list(heaps.between([], 10)) == [(0, 10)]
    assert list(heaps.between([(0, 3), (3, 5), (8, 20)], 10)) == [(5, 8)]
    assert list(heaps.between([(6, 7), (2, 9), (4, 5)], 10)) == [(0, 2), (9, 10)]
    assert list(heaps.between([(0, 10)], 10)) == []


def test_columns_hold_no_collection(session: Path) -> None:
    """What is left out of the search in a session is what is compressed, and nothing else."""
    with h5py.File(session) as file:
        stretches = [one for data in file["streams/board"].values() for one in inspection._chunks(data)]
        assert len(stretches) == len(file["streams/board"]) and inspection._chunks(file["events/tick"]) == []
    data = session.read_bytes()
    for start, end in stretches:
        zlib.decompress(data[start:end])
        assert not any(start <= place < end for place in collections(data))


def test_amended_again_and_again_it_stays_sound_and_small(session: Path) -> None:
    for size in (10, 5000, 100, 40_000, 3):
        write_results(session, {"levels": ["x" * size]})
        assert damaged_heap(session) is None
        data = session.read_bytes()
        assert len(data) < 60_000 + size and all(objects(data, place) for place in collections(data))
        with open_session(session) as opened:
            assert opened.results["final"] == {"levels": ["x" * size]}


OPENING = """
import sys
from rig.record.errors import Damaged
from rig.session import open_session
try:
    open_session(sys.argv[1])
except Damaged as error:
    print(error)
"""


def test_what_hdf5_would_not_come_back_from(session: Path) -> None:
    """Free space of no size; in a process of its own, so that this test ends even if that one does not."""
    broken = bytearray(session.read_bytes())
    for place in collections(bytes(broken)):
        last = objects(bytes(broken), place)[-1]
        if struct.unpack_from("<H", broken, last)[0] == 0:
            struct.pack_into("<Q", broken, last + 8, 0)
    session.write_bytes(broken)
    words = [sys.executable, "-c", OPENING, str(session)]
    done = subprocess.run(words, capture_output=True, text=True, timeout=60, check=True)
    assert "the texts kept from byte" in done.stdout
