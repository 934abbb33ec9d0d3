"""Session files really damaged: every check tells what is wrong in its own field, with and without digests."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from sessions_to_damage import short

from rig.command.sessions import session_rig, software
from rig.record.amendment import write_results
from rig.verification.check import Check, found, skipped
from rig.verification.verify import NAMES, sound, verify

BOARD = "streams/board"
#: Of another version the results are not worked out again, which takes most of the time.
OTHER = "another version"


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return short(tmp_path_factory.mktemp("short"))


@pytest.fixture
def copy(whole: Path, tmp_path: Path) -> Path:
    place = tmp_path / "a.h5"
    place.write_bytes(whole.read_bytes())
    return place


def wrong(checks: list[Check]) -> set[str]:
    assert [check.name for check in checks] == list(NAMES)
    for check in checks:
        assert check.sentence and "\n" not in check.sentence
    return {check.name for check in checks if check.outcome == "wrong"}


def sentence(checks: list[Check], name: str) -> str:
    return next(check.sentence for check in checks if check.name == name)


def put(file: h5py.File, place: str, values: Any) -> None:
    """Other values in the place of a dataset, with its attributes and its way of being stored."""
    old = file[place]
    kept, kind = dict(old.attrs), old.dtype
    del file[place]
    file.create_dataset(place, data=values, dtype=kind, chunks=(1000,) if len(values) > 1000 else None)
    for name, value in kept.items():
        file[place].attrs[name] = value


def events(file: h5py.File) -> list[list[Any]]:
    columns = [list(file[f"events/{name}"][:]) for name in ("tick", "kind", "data")]
    return [list(row) for row in zip(*columns, strict=True)]


def write_events(file: h5py.File, rows: list[list[Any]]) -> None:
    for index, name in enumerate(("tick", "kind", "data")):
        put(file, f"events/{name}", [row[index] for row in rows])


def without_event(kind: str) -> Callable[[h5py.File], None]:
    def act(file: h5py.File) -> None:
        rows = events(file)
        rows.remove(next(row for row in rows if row[1] == kind.encode()))
        write_events(file, rows)

    return act


def changed_event(kind: str, column: int, value: Any) -> Callable[[h5py.File], None]:
    def act(file: h5py.File) -> None:
        rows = events(file)
        row = next(row for row in rows if row[1] == kind.encode())
        row[column] = value(row[column]) if callable(value) else value
        write_events(file, rows)

    return act


def armed_again(file: h5py.File) -> None:
    rows = events(file)
    write_events(file, [*rows, [rows[-1][0], b"armed", b'{"by": ""}']])


def without_row(file: h5py.File) -> None:
    for name in file[BOARD]:
        put(file, f"{BOARD}/{name}", np.delete(file[f"{BOARD}/{name}"][:], 5000))


def rows_swapped(file: h5py.File) -> None:
    for name in ("tick", "time_s"):
        data = file[f"{BOARD}/{name}"]
        data[[70, 71]] = data[[70, 71]][::-1]


def longer_step(file: h5py.File) -> None:
    """All ticks from one on are half a period later, and the times with them."""
    for name, step in (("tick", 500), ("time_s", 500e-6)):
        data = file[f"{BOARD}/{name}"]
        data[100:] = data[100:] + data.dtype.type(step)


def change(place: str, index: int, step: float) -> Callable[[h5py.File], None]:
    def act(file: h5py.File) -> None:
        data = file[place]
        data[index] = np.asarray(data[index]).astype(float) + step

    return act


def attribute(place: str, name: str, value: Any) -> Callable[[h5py.File], None]:
    return lambda file: file[place].attrs.__setitem__(name, value)


def text(place: str, act: Callable[[str], str]) -> Callable[[h5py.File], None]:
    return lambda file: file[place].__setitem__((), act(file[place][()].decode()))


Act = Callable[[h5py.File], Any]
#: What is done, which checks besides the digests must find it, and words of one of them.
DAMAGE: dict[str, tuple[Act, set[str], str]] = {
    "a sample": (change(f"{BOARD}/body", 4321, 10**6), {"overview"}, "that of body does not follow"),
    "a status": (change(f"{BOARD}/status", 4321, 1), set(), ""),
    "a scale": (attribute(f"{BOARD}/body", "scale", 1e-3), {"texts"}, "not that of the columns"),
    "a unit": (attribute(f"{BOARD}/load", "unit", "kN"), {"texts"}, "not that of the columns"),
    "a calibration": (text("header", lambda t: t.replace("2", "3", 1)), set(), ""),
    "a row dropped": (without_row, {"rows", "overview"}, "1 row missing before tick"),
    "rows swapped": (rows_swapped, {"clock"}, "in 1 place, first at"),
    "half a step": (longer_step, {"clock"}, "1 step of no whole number of row periods"),
    "a time": (change(f"{BOARD}/time_s", 9, 1e-6), {"clock"}, "1 time that cannot follow from the tick"),
    "a tick rate": (attribute(BOARD, "tick_hz", 999_999), {"clock", "texts"}, "the header gives 1000000"),
    "a row period": (attribute(BOARD, "row_period_ticks", 500), {"rows", "texts"}, "the stream 500"),
    "a loss smaller": (change("losses/rows", 0, -1), {"rows", "events"}, "20 rows, 1 frames"),
    "a loss elsewhere": (change("losses/tick", 0, 1000), {"rows", "events"}, "frames show none"),
    "a loss untold": (without_event("loss"), {"events"}, "was not told by the run"),
    "no end of a tap": (without_event("tap_end"), {"events"}, "the event 'tap 0' at tick"),
    "no tap": (without_event("tap"), {"events"}, "the event 'tap end 0' at tick"),
    "no end of a record": (without_event("quiet_end"), {"events"}, "has no end"),
    "no level": (without_event("level"), {"events"}, "belongs to no level"),
    "no end of a level": (without_event("level_end"), {"events"}, "the event 'level 0' at tick"),
    "no mark at all": (without_event("settled"), set(), ""),
    "an event too late": (changed_event("standstill", 0, lambda t: t + 10**8), {"events"}, "outside the recording"),
    "an event back in time": (changed_event("tap", 0, lambda t: t - 10**7), {"events"}, "comes after one of tick"),
    "an unheard-of event": (changed_event("settled", 1, b"sett1ed"), {"events"}, "no known kind"),
    "armed after the end": (armed_again, {"events"}, "after the run had finished"),
    "another overview": (change("overview/board/load/16", 7, 1), {"overview"}, "that of load"),
    "no overview at all": (lambda f: f.pop("overview"), {"overview"}, "the session has none, and every session"),
    "no overview of one": (lambda f: f.pop("overview/board/load"), {"overview"}, "that of load has bins of []"),
    "a level of nonsense": (
        lambda f: f["overview/board/load"].move("16", "fine"), {"overview"}, "that of load cannot be compared"
    ),
    "another date": (attribute("/", "created_utc", "2025-01-01T00:00:00+00:00"), set(), ""),
    "something more": (lambda f: f.create_dataset("more", data=3.0), set(), ""),
    "something less": (lambda f: f["results/final"].attrs.pop("software"), set(), ""),
}  # fmt: skip


@pytest.mark.parametrize("digests", [True, False], ids=["digests", "none"])
@pytest.mark.parametrize("what", DAMAGE)
def test_every_damage_is_told_in_its_field(copy: Path, what: str, digests: bool) -> None:
    act, fields, words = DAMAGE[what]
    with h5py.File(copy, "r+") as file:
        act(file)
        if not digests:
            del file["digests"]
    found = verify(copy, OTHER, session_rig)
    assert wrong(found) == fields | {"digests"}
    assert words in "; ".join(problem for check in found for problem in check.problems)
    if not digests:
        assert sentence(found, "digests") == "the session has none, and every session is sealed with them"


@pytest.mark.parametrize("which", ["rig", "protocol"])
def test_texts_this_version_cannot_read(copy: Path, which: str) -> None:
    with h5py.File(copy, "r+") as file:
        file[which][()] = file[which][()].decode()[:150]
    found = verify(copy, software(), session_rig)
    assert wrong(found) == {"digests", "texts"}
    assert f"/{which}" in sentence(found, "texts")
    results = next(check for check in found if check.name == "results")
    assert results.outcome == ("not checked" if which == "rig" else "ok")
    # Another version may well write what this one cannot read.
    found = verify(copy, OTHER, session_rig)
    assert wrong(found) == {"digests"}
    assert "another version does not read them" in sentence(found, "texts")


def test_a_sound_session_is_sound(whole: Path) -> None:
    found = verify(whole, software(), session_rig)
    assert [check.outcome for check in found] == ["ok"] * len(NAMES)
    assert "60 lost, in 3 gaps" in sentence(found, "rows")
    assert "58 verdicts and the results follow" in sentence(found, "results")


def test_results_that_do_not_follow_are_told_each_of_them(copy: Path, whole: Path) -> None:
    with h5py.File(copy, "r+") as file:
        final = json.loads(file["results/final"][()])
        live = json.loads(file["results/live"][()])
        live[5]["tick"] += 1
        file["results/live"][()] = json.dumps(live)
    value = final["levels"][0]["flap_hz"]["value"]
    final["levels"][0]["flap_hz"]["value"] = value * (1 + 1e-8)
    final["levels"][0]["regime"] = "unstable"
    write_results(copy, final)
    found = verify(copy, software(), session_rig)
    assert wrong(found) == {"digests", "results"}
    told = next(check.problems for check in found if check.name == "results")
    assert len(told) == 3
    assert "verdict 5 (condition" in told[0] and "levels[0].flap_hz.value" in told[1]
    assert told[2] == "levels[0].regime: unstable stored, stable now"
    assert sentence(found, "digests") == "/results/live has changed"
    # Amended as it should be, it is sound again: but for the verdicts.
    with h5py.File(whole) as file:
        write_results(copy, json.loads(file["results/final"][()]), software())
    assert (
        len(
            next(check.problems for check in verify(copy, software(), session_rig) if check.name == "results")
        )
        == 1
    )


@pytest.mark.parametrize("what", ["a sample", "a scale", "no mark at all", "a row dropped"])
def test_what_was_changed_comes_to_other_results(copy: Path, what: str) -> None:
    """The rows of a tap; digests and overview are taken away, the results alone must tell."""
    with h5py.File(copy, "r+") as file:
        rows = events(file)
        tap = next(int(row[0]) for row in rows if row[1] == b"tap")
        place = int(np.searchsorted(file[f"{BOARD}/tick"][:], tap + 500_000))
        act = change(f"{BOARD}/body", place, 100) if what == "a sample" else DAMAGE[what][0]
        act(file)
        del file["digests"], file["overview"]
    found = verify(copy, software(), session_rig)
    assert "results" in wrong(found) - {"digests", "overview"}


def test_files_that_cannot_be_opened(copy: Path) -> None:
    data = copy.read_bytes()
    for length in (0, 7, 100, len(data) // 2, len(data) - 1):
        copy.write_bytes(data[:length])
        found = verify(copy, OTHER, session_rig)
        assert wrong(found) == {"structure"} and not sound(found)
        assert {check.outcome for check in found[1:]} == {"not checked"}
    with pytest.raises(FileNotFoundError):
        verify(copy.with_name("none.h5"), OTHER, session_rig)


def test_what_cannot_be_opened_is_looked_through_all_the_same(copy: Path) -> None:
    with h5py.File(copy, "r+") as file:
        file["events/data"][3] = "{"
        file[f"{BOARD}/body"][3] = 9
    found = verify(copy, OTHER, session_rig)
    assert wrong(found) == {"structure", "digests"}
    assert sentence(found, "digests") == "/events/data has changed; /streams/board/body has changed"


def test_a_flipped_bit_inside_a_column_does_not_hide_the_rest(copy: Path) -> None:
    with h5py.File(copy, "r+") as file:
        DAMAGE["no tap"][0](file)
        place = file[f"{BOARD}/tick"].id.get_chunk_info(0).byte_offset + 100
    data = bytearray(copy.read_bytes())
    data[place] ^= 0x10
    copy.write_bytes(data)
    found = verify(copy, software(), session_rig)
    assert wrong(found) == {"digests", "clock", "events"}
    assert "/streams/board/tick cannot be read" in sentence(found, "digests")
    assert "/streams/board/tick cannot be read" in sentence(found, "clock")
    assert [check.outcome for check in found if check.name in ("rows", "results")] == ["not checked"] * 2


@pytest.mark.parametrize("gone", ["digests", "overview"])
def test_without_what_every_session_has_it_is_not_sound(copy: Path, gone: str) -> None:
    with h5py.File(copy, "r+") as file:
        del file[gone]
    found = verify(copy, OTHER, session_rig)
    assert gone in wrong(found) and not sound(found)
    assert "the session has none, and every session" in sentence(found, gone)


def test_a_check_left_undone_is_not_sound_unless_there_is_no_occasion_for_it() -> None:
    done = found("structure", [], "good")
    assert sound([done, skipped("results", "worked out by another version", due=False)])
    assert not sound([done, skipped("rows", "the ticks cannot be read")])
