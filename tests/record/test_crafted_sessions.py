"""Session files that are valid HDF5 and yet no session, and bits that flipped on the disk."""

from __future__ import annotations

import struct
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from small_journal import frame, write

from rig.record.amendment import write_results
from rig.record.errors import Damaged
from rig.record.sealing import seal
from rig.session import open_session

WHOLE = np.concatenate([frame(k).raw for k in range(6)])


@pytest.fixture
def session(tmp_path: Path) -> Path:
    write(tmp_path / "a.journal", 6)
    seal(tmp_path / "a.journal", tmp_path / "a.h5")
    return tmp_path / "a.h5"


def shared_groups(file: h5py.File) -> None:
    """2^60 ways through 60 groups: looking at each would never end."""
    group = file.create_group("deep")
    for _ in range(60):
        below = group.create_group("left")
        group["right"] = below
        group = below


def itself(file: h5py.File) -> None:
    file["loop"] = file["/"]


def put(place: str, value: Any) -> Callable[[h5py.File], None]:
    def act(file: h5py.File) -> None:
        if place in file:
            del file[place]
        file[place] = value

    return act


def attribute(place: str, name: str, value: Any) -> Callable[[h5py.File], None]:
    return lambda file: file[place].attrs.__setitem__(name, value)


def event(kind: str, data: str) -> Callable[[h5py.File], None]:
    def act(file: h5py.File) -> None:
        file["events/kind"][1], file["events/data"][1] = kind, data

    return act


CRAFTED: dict[str, tuple[Callable[[h5py.File], Any], str]] = {
    "shared groups": (shared_groups, "two places"),
    "a group that holds itself": (itself, "two places"),
    "no stream of the board": (lambda file: file.pop("streams/board"), "no stream"),
    "an event that is a list": (
        lambda file: file["events/data"].__setitem__(0, "[1]"), "/events/data, row 0: expected a JSON object"
    ),
    "an event of bytes": (
        lambda file: file["events/kind"].__setitem__(2, b"\xff\xfe"), "/events/kind, row 2: expected text in UTF-8"
    ),
    "an event of half a JSON": (
        lambda file: file["events/data"].__setitem__(5, "{"), "/events/data, row 5: expected JSON"
    ),
    "a kind too few": (
        put("events/kind", ["mark"] * 5), "/events/kind: expected 6 rows as in /events/tick, found 5"
    ),
    "a rig of numbers": (put("rig", np.arange(3)), "/rig: expected one text"),
    "no losses": (lambda file: file.pop("losses/tick"), "/losses/tick is missing"),
    "no row period": (
        lambda file: file["streams/board"].attrs.pop("row_period_ticks"),
        "/streams/board: expected an attribute row_period_ticks",
    ),
    "a tick rate in words": (
        attribute("streams/board", "tick_hz", "fast"),
        "/streams/board: expected a whole number as tick_hz, found 'fast'"
    ),
    "a link out of the file": (
        lambda file: file.__setitem__("loop", h5py.SoftLink("/rig")), ": /loop links to another place"
    ),
    "no streams at all": (lambda file: file.pop("streams"), "no stream"),
    "events that are numbers": (put("events/kind", np.arange(6)), "/events/kind: expected texts"),
    "a tap without a number": (event("tap_excluded", '{"reason": "x"}'), "has None as tap"),
    "a level at a drive in words": (
        event("level", '{"level": 1, "direction": "rising", "drive_v": "much"}'), "has 'much' as drive_v"
    ),
    "JSON without a bottom": (lambda file: file["events/data"].__setitem__(0, "[" * 10**5), "damaged"),
    "a header that is a list": (put("header", "[]"), "/header: expected a JSON object"),
    "results that are a number": (put("results/final", "3"), "/results/final: expected a JSON object or null"),
    "live results that are none": (put("results/live", "{}"), "/results/live: expected a JSON list"),
    "losses of different length": (
        put("losses/tick", np.arange(3, dtype="u8")), "/losses/rows: expected 3 rows as in /losses/tick, found 0"
    ),
    "no time base": (attribute("streams/board", "tick_hz", 0), "0 ticks a second"),
    "a scale that is no number": (
        attribute("streams/board/body", "scale", np.nan), "/streams/board/body: expected a number as scale, found nan"
    ),
    "two scales": (
        attribute("streams/board/body", "scale", [1.0, 2.0]), "a number as scale, found array([1., 2.])"
    ),
    "no scale": (
        lambda file: file["streams/board/body"].attrs.pop("scale"), "/streams/board/body: expected an attribute scale"
    ),
    "one column twice": (attribute("streams/board/body", "column", 1), "one number"),
    "a group for a column": (
        lambda file: file["streams/board"].create_group("more"), "/streams/board/more: expected a column"
    ),
}  # fmt: skip


@pytest.mark.parametrize("what", CRAFTED)
def test_crafted_files_are_refused_in_a_sentence(session: Path, what: str) -> None:
    act, words = CRAFTED[what]
    with h5py.File(session, "r+") as file:
        act(file)
    with pytest.raises(Damaged) as caught:
        open_session(session)
    told = str(caught.value)
    assert words in told and str(session) in told and "\n" not in told
    for foreign in ("object has no", "literal", "codec", "zip()", "Unable to", "//", "Expecting"):
        assert foreign not in told  # words about the file, not about Python


def test_ticks_that_go_back_are_damage(session: Path) -> None:
    with h5py.File(session, "r+") as file:
        file["streams/board/tick"][3] = 0
    with open_session(session) as opened:
        for _ in range(2):  # not remembered as good after the first look
            with pytest.raises(Damaged, match="do not increase"):
                _ = opened.streams["board"].tick
        with pytest.raises(Damaged):
            list(opened.streams["board"].blocks(5))


def flips(path: Path, first: int, length: int) -> Any:
    """The file with one byte changed, for each byte of a stretch."""
    data = path.read_bytes()
    for place in range(first, first + length):
        broken = bytearray(data)
        broken[place] ^= 0x10
        path.write_bytes(broken)
        yield place
    path.write_bytes(data)


def test_no_flipped_byte_of_a_column_gives_a_wrong_row(session: Path) -> None:
    """Compressed data carry a check sum (Adler-32 of the zlib format, RFC 1950)."""
    with h5py.File(session) as file:
        chunk = file["streams/board/body"].id.get_chunk_info(0)
    told = 0
    for _ in flips(session, chunk.byte_offset, chunk.size):
        with open_session(session) as opened:
            try:
                found = opened.streams["board"].raw("body")
            except Damaged as error:
                assert "/streams/board/body cannot be read" in str(error)
                told += 1
                continue
            np.testing.assert_array_equal(found, WHOLE[:, 0])
    assert told >= chunk.size - 4  # a few header bits mean nothing to zlib


@pytest.mark.parametrize("amended", [False, True])
def test_a_flipped_bit_in_a_scale_is_found(session: Path, amended: bool) -> None:
    if amended:
        write_results(session, {"levels": []})
    place = session.read_bytes().find(struct.pack("<d", 7.67e-4))
    assert place > 0
    for _ in flips(session, place, 8):
        with pytest.raises(Damaged):
            open_session(session)
    open_session(session).close()
