"""`haltere verify` as typed: one line a check, an exit code, and the same as JSON."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import h5py
import pytest

from rig.command import main
from rig.command.sessions import run_session
from rig.files.protocol import read_protocol
from rig.files.rig import read_rig
from rig.shipped import find

NAMES = ["structure", "digests", "clock", "rows", "events", "texts", "overview", "results"]


def haltere(*words: str | Path) -> subprocess.CompletedProcess[str]:
    done = subprocess.run(
        [sys.executable, "-m", "rig.command", *map(str, words)], capture_output=True, text=True, check=False
    )
    assert "Traceback" not in done.stderr, done.stderr
    return done


@pytest.fixture(scope="module")
def session(tmp_path_factory: pytest.TempPathFactory) -> Path:
    from drivers.clock import VirtualClock

    rig = read_rig(find("boom"))
    path = tmp_path_factory.mktemp("verify") / "quick.h5"
    run_session(rig, read_protocol(find("quick"), rig), path, VirtualClock(), pace="fast")
    return path


def test_a_line_for_each_check(session: Path) -> None:
    before = session.read_bytes()
    done = haltere("verify", session)
    assert done.returncode == 0 and done.stderr == ""
    lines = [line.split(maxsplit=2) for line in done.stdout.splitlines()]
    assert [line[:2] for line in lines] == [["ok", name] for name in NAMES]
    assert all(line[2] for line in lines)
    assert "181 verdicts and the results follow from rows and events within 1e-9" in done.stdout
    assert session.read_bytes() == before


def test_damage_is_an_exit_code_and_all_of_it_is_told(
    session: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    copy = tmp_path / "a.h5"
    copy.write_bytes(session.read_bytes())
    with h5py.File(copy, "r+") as file:
        file["streams/board/body"][1000] += 10**6
        file["streams/board/load"].attrs["unit"] = "kN"
    assert main(["verify", str(copy)]) == 5
    told = capsys.readouterr()
    assert told.err == "" and told.out.count("\n") == len(NAMES)
    wrong = [line.split()[1] for line in told.out.splitlines() if line.startswith("wrong")]
    assert wrong[:3] == ["digests", "texts", "overview"]
    assert main(["verify", str(copy), "--json"]) == 5
    found = json.loads(capsys.readouterr().out)
    assert found["session"] == str(copy) and found["sound"] is False
    assert [check["check"] for check in found["checks"]] == NAMES
    assert found["checks"][1]["problems"] == [
        "/streams/board/body has changed", "the attributes of /streams/board/load have changed"
    ]  # fmt: skip


def test_files_that_are_none(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["verify", str(tmp_path / "nothing.h5")]) == 2
    told = capsys.readouterr()
    assert "there is none of that name" in told.err and told.err.count("\n") == 1 and told.out == ""
    (tmp_path / "a.h5").write_bytes(b"nothing of the kind")
    assert main(["verify", str(tmp_path / "a.h5")]) == 5
    lines = capsys.readouterr().out.splitlines()
    assert lines[0].startswith("wrong        structure  ") and "not an HDF5 file" in lines[0]
    assert all(line.startswith("not checked") for line in lines[1:]) and len(lines) == len(NAMES)
