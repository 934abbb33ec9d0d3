"""`haltere recover` as typed: damaged, cut off and misnamed journals, and what the other commands say of the result."""

from __future__ import annotations

import errno
import io
import json
import re
from pathlib import Path
from typing import Any

import h5py
import pytest

from rig.command import main
from rig.record import journal as jn


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The journal of a short simulated run."""
    folder = tmp_path_factory.mktemp("whole")
    out = folder / "quick.h5"
    assert main(["run", "quick", "--rig", "boom", "--out", str(out), "--keep-journal", "--quiet"]) == 0
    return out.with_suffix(".journal")


@pytest.fixture
def journal(whole: Path, tmp_path: Path) -> Path:
    place = tmp_path / "a.journal"
    place.write_bytes(whole.read_bytes())
    return place


def events(path: Path, kind: str) -> list[jn.Record]:
    return [
        record for record in jn.Journal(path) if record.kind == jn.EVENT and record.fields()["kind"] == kind
    ]


def flip(path: Path, place: int) -> None:
    data = bytearray(path.read_bytes())
    data[place] ^= 0x10
    path.write_bytes(data)


def run(capsys: pytest.CaptureFixture[str], *words: object) -> tuple[int, str, str]:
    capsys.readouterr()
    code = main([str(word) for word in words])
    told = capsys.readouterr()
    return code, told.out, told.err


def line(text: str, name: str) -> str:
    return next(one for one in text.splitlines() if one.split()[1:2] == [name] or f" {name} " in one)


def test_every_command_tells_of_a_damage_and_none_calls_it_wrong(
    journal: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """The beginning of a tap is lost: its end must not be taken for that of the tap before."""
    lost = events(journal, "tap")[3].start
    flip(journal, lost + 20)
    session = journal.with_suffix(".h5")
    code, out, err = run(capsys, "recover", journal)
    assert code == 5 and f"damaged record at byte {lost}" in err and err.count("\n") == 1
    assert "1 record missing" in out and "rows behind the damage taken in" in out
    code, out, err = run(capsys, "verify", session)
    assert code == 0, out
    assert f"recovered from a journal: damaged record at byte {lost}" in line(out, "structure")
    assert "as far as the journal could be read" in line(out, "events")
    code, out, err = run(capsys, "analyse", session, "--json")
    assert code == 0 and "was recovered from a journal: damaged record" in err and err.count("\n") == 1
    found = json.loads(out)
    assert 3 not in [tap["tap"] for tap in found["taps"]] and len(found["taps"]) == 9
    assert len({(tap["tap"], tap["tick"]) for tap in found["taps"]}) == 9
    code, out, err = run(capsys, "replay", session, "--json", "--quiet")
    assert code == 0 and json.loads(out) == found and "was recovered from a journal" in err
    code, _, err = run(capsys, "report", session)
    page = session.with_suffix(".html").read_text(encoding="utf-8")
    assert code == 0 and "The session was recovered from a journal: damaged record" in page
    assert page.index("The session was recovered") < page.index('id="verdict"')


@pytest.mark.parametrize(
    "kinds", [("level",), ("level_end", "level"), ("settled", "quiet", "quiet_end"), ("tap_end",)]
)
def test_lost_events_leave_replay_and_analysis_the_same(
    journal: Path, capsys: pytest.CaptureFixture[str], kinds: tuple[str, ...]
) -> None:
    first = events(journal, kinds[0])[1]
    places = [next(one for one in events(journal, kind) if one.start >= first.start).start for kind in kinds]
    drive = None
    if "level" in kinds:
        drive = next(one for one in events(journal, "level") if one.start == places[-1]).fields()["drive_v"]
    for place in places:
        flip(journal, place + 20)
    session = journal.with_suffix(".h5")
    assert run(capsys, "recover", journal)[0] == 5
    assert run(capsys, "verify", session)[0] == 0
    analysed = json.loads(run(capsys, "analyse", session, "--json")[1])
    assert json.loads(run(capsys, "replay", session, "--json", "--quiet")[1]) == analysed
    if (
        drive is not None
    ):  # of a level whose beginning is not known nothing is told, least of all at another drive
        drives = [(one["direction"], round(one["drive_v"]["value"])) for one in analysed["levels"]]
        assert ("rising", round(drive)) not in drives and len(drives) == 5
        assert sum(one["taps"] for one in analysed["levels"]) == 8


def test_cut_off_in_a_tap(journal: Path, capsys: pytest.CaptureFixture[str]) -> None:
    tap = events(journal, "tap")[2]
    frames = [one for one in jn.Journal(journal) if one.kind == jn.FRAME and one.start > tap.end]
    journal.write_bytes(journal.read_bytes()[: frames[20].start + 5])
    code, _, err = run(capsys, "recover", journal)
    assert code == 5 and "cut off in a record at byte" in err and "all before it is sealed" in err
    code, out, _ = run(capsys, "verify", journal.with_suffix(".h5"))
    assert code == 0, out
    told = line(out, "events")
    assert re.search(
        r"but for the event 'tap 2' at tick \d+ and the event 'level 1' at tick \d+, in which", told
    )
    assert "ended without an end record; cut off in a record at byte" in line(out, "structure")
    # The same events without the word that the journal was cut off are not those of a run.
    with h5py.File(journal.with_suffix(".h5"), "r+") as file:
        del file["recovered"]
    code, out, _ = run(capsys, "verify", journal.with_suffix(".h5"))
    assert code == 5 and "'tap 2'" in line(out, "events") and "has no end" in line(out, "events")


def test_zeros_at_the_end_are_a_torn_one(journal: Path, capsys: pytest.CaptureFixture[str]) -> None:
    frames = [one for one in jn.Journal(journal) if one.kind == jn.FRAME]
    journal.write_bytes(journal.read_bytes()[: frames[500].start] + bytes(5000))
    code, out, err = run(capsys, "recover", journal)
    assert code == 0 and err == "" and "5000 bytes are zeros that a crash of the host left" in out


def test_what_is_refused_is_bad_usage(
    journal: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    code, _, err = run(capsys, "recover", journal, "--out", tmp_path / "nope" / "x.h5")
    assert code == 2 and err == (
        f"haltere: {tmp_path}/nope/x.h5 cannot be written: {tmp_path}/nope is not a folder\n"
    )
    assert run(capsys, "recover", journal)[0] == 0
    code, _, err = run(capsys, "recover", journal.with_suffix(".h5"))
    assert code == 2 and "expected a journal, this is a session file" in err


class Small(io.FileIO):
    """A file on a disk with room for so many bytes."""

    room = 0

    def write(self, data: Any) -> int:
        fits = min(len(data), self.room - self.tell())
        if fits <= 0:
            raise OSError(errno.ENOSPC, "No space left on device")
        return super().write(bytes(data[:fits]))


@pytest.mark.parametrize("room", [0, 100, 5000, 50_000, 200_000, 500_000])
def test_a_full_disk_is_told_in_a_sentence(
    journal: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, room: int
) -> None:
    """However far it came: no leftover, none of HDF5's own words, and no end of the process either."""
    from rig.record import target

    monkeypatch.setattr(target, "opened", lambda path: Small(path, "w+"))
    monkeypatch.setattr(Small, "room", room)
    code, _, err = run(capsys, "recover", journal)
    assert code == 2 and err == (
        f"haltere: {journal.with_suffix('.h5')} cannot be written: no space is left on the disk of {journal.parent}\n"
    )
    assert [one.name for one in journal.parent.iterdir()] == ["a.journal"]
