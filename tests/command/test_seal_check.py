"""What was changed since sealing is told before anything is printed of it; a report that fails leaves nothing."""

from __future__ import annotations

import errno
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import pytest

from rig.command import main


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> Path:
    out = tmp_path_factory.mktemp("whole") / "s1.h5"
    assert main(["run", "quick", "--rig", "boom", "--out", str(out), "--quiet"]) == 0
    return out


@pytest.fixture
def session(whole: Path, tmp_path: Path) -> Path:
    place = tmp_path / "s1.h5"
    place.write_bytes(whole.read_bytes())
    return place


def results(file: h5py.File) -> None:
    final = json.loads(file["results/final"][()])
    final["levels"][0]["decay_per_s"]["value"] = 9.0
    file["results/final"][()] = json.dumps(final)


def several(file: h5py.File) -> None:
    for name in ("body", "crank", "load", "current", "voltage"):
        file[f"streams/board/{name}"].attrs["calibration"] = "other"


EDITED: dict[str, tuple[Callable[[h5py.File], Any], str]] = {
    "results": (results, "is not as it was sealed (results/final)"),
    "a scale": (
        lambda f: f["streams/board/body"].attrs.__setitem__("scale", 1e-3),
        "is not as it was sealed (streams/board/body)",
    ),
    "a date": (
        lambda f: f.attrs.__setitem__("created_utc", "2020"),
        "is not as it was sealed (its own attributes)",
    ),
    "losses": (lambda f: f.__setitem__("more", 3.0), "is not as it was sealed (more)"),
    "many": (several, " and 1 more)"),
    "no digests": (
        lambda f: f.pop("digests"),
        "holds no digests, nothing shows whether it is as it was sealed",
    ),
}


@pytest.mark.parametrize("what", EDITED)
def test_it_is_told_first(session: Path, capsys: pytest.CaptureFixture[str], what: str) -> None:
    act, words = EDITED[what]
    with h5py.File(session, "r+") as file:
        act(file)
    capsys.readouterr()
    assert main(["analyse", str(session), "--json"]) == 0
    told = capsys.readouterr()
    assert json.loads(told.out)["levels"]
    assert words in told.err and told.err.endswith(": see haltere verify\n") and told.err.count("\n") == 1
    if what not in ("results", "no digests"):
        return
    assert main(["report", str(session)]) == 0
    assert words in capsys.readouterr().err
    page = session.with_suffix(".html").read_text(encoding="utf-8")
    assert page.index(f"The session {words}") < page.index('id="verdict"')


def test_of_one_that_is_as_it_was_nothing_is_said(session: Path, capsys: pytest.CaptureFixture[str]) -> None:
    capsys.readouterr()
    assert main(["analyse", str(session)]) == 0 and main(["report", str(session)]) == 0
    assert capsys.readouterr().err == ""
    page = session.with_suffix(".html").read_text(encoding="utf-8")
    assert "haltere verify" not in page and "The session was" not in page


@pytest.mark.parametrize(
    ("number", "words"),
    [(errno.ENOSPC, "no space is left on the disk of "), (errno.EROFS, "nothing may be written into ")],
)
def test_a_report_that_cannot_be_written(
    session: Path,
    capsys: pytest.CaptureFixture[str],
    monkeypatch: pytest.MonkeyPatch,
    number: int,
    words: str,
) -> None:
    def refuse(self: Path, text: str, **_: object) -> int:
        with self.open("w", encoding="utf-8") as file:
            file.write(text[:1000])
        raise OSError(number, "as the system says it", str(self))

    monkeypatch.setattr(Path, "write_text", refuse)
    capsys.readouterr()
    assert main(["report", str(session)]) == 2
    told = capsys.readouterr().err
    assert told == f"haltere: {session.with_suffix('.html')}: {words}{session.parent}\n"
    assert [one.name for one in session.parent.iterdir()] == ["s1.h5"]


def test_a_report_into_no_folder(session: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    capsys.readouterr()
    assert main(["report", str(session), "--out", str(tmp_path / "nope" / "r.html")]) == 2
    assert capsys.readouterr().err == f"haltere: {tmp_path}/nope/r.html: {tmp_path}/nope is not a folder\n"
