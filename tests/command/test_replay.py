"""`haltere replay`: as typed, and its pace on a clock of its own."""

from __future__ import annotations

import itertools
import json
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import h5py
import pytest

from drivers.clock import VirtualClock
from rig.command import main
from rig.command.progress import RunProgress
from rig.command.replay import agreement, replayed
from rig.command.sessions import software
from rig.record.amendment import write_results
from rig.results import SessionResult
from rig.session import open_session
from rig.verdicts import Verdict


def haltere(*words: str | Path) -> subprocess.CompletedProcess[str]:
    words = tuple(map(str, words))
    done = subprocess.run(
        [sys.executable, "-m", "rig.command", *words], capture_output=True, text=True, check=False
    )
    assert "Traceback" not in done.stderr, done.stderr
    return done


@pytest.fixture(scope="module")
def run(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, subprocess.CompletedProcess[str]]:
    path = tmp_path_factory.mktemp("replay") / "quick.h5"
    done = haltere("run", "quick", "--rig", "boom", "--out", path)
    assert done.returncode == 0, done.stderr
    return path, done


def test_it_shows_what_the_run_showed_and_comes_to_the_same(
    run: tuple[Path, subprocess.CompletedProcess[str]],
) -> None:
    path, live = run
    done = haltere("replay", path)
    assert done.returncode == 0, done.stderr
    levels = [line for line in live.stderr.splitlines() if " V: " in line]
    assert len(levels) == 6 and done.stderr.splitlines() == levels
    table, _, last = done.stdout.rstrip().rpartition("\n\n")
    assert live.stdout.startswith(table)
    with open_session(path) as session:
        count = len(session.results["live"])
    assert last == f"the same as live: {count} verdicts, results equal within 1e-9"


def test_json_is_that_of_analyse_and_nothing_else(
    run: tuple[Path, subprocess.CompletedProcess[str]],
) -> None:
    done = haltere("replay", run[0], "--json", "--quiet")
    assert done.returncode == 0
    assert done.stdout == haltere("analyse", run[0], "--json").stdout
    assert done.stderr.startswith("the same as live") and done.stderr.count("\n") == 1


def test_a_difference_is_an_exit_code(
    run: tuple[Path, subprocess.CompletedProcess[str]], tmp_path: Path
) -> None:
    copy = tmp_path / "a.h5"
    copy.write_bytes(run[0].read_bytes())
    with open_session(copy) as session:
        final = session.results["final"]
    value = final["levels"][3]["decay_per_s"]["value"]
    final["levels"][3]["decay_per_s"]["value"] = 0.5
    write_results(copy, final)
    done = haltere("replay", copy, "--quiet")
    assert done.returncode == 5
    assert done.stdout.endswith(
        f"not the same as live: levels[3].decay_per_s.value: 0.5 stored, {value} now\n"
    )


Gone = tuple[list[Verdict], SessionResult]


@pytest.fixture(scope="module")
def gone(run: tuple[Path, subprocess.CompletedProcess[str]]) -> Gone:
    """The session gone through once, to be compared with copies that say something else."""
    with open_session(run[0]) as session:
        return replayed(session, RunProgress(1.0, quiet=True), None, VirtualClock())


Texts = Callable[
    [str, str], tuple[str, str, str]
]  # live and final as they are; as they shall be, and by what


def changed(live: str, final: str, **fields: object) -> tuple[str, str]:
    told = json.loads(live)
    told[0] |= fields
    return json.dumps(told), final


SAID: dict[str, tuple[Texts, bool, str]] = {
    "all": (lambda live, final: (live, final, ""), True, "the same as live: "),
    "nothing": (lambda live, final: ("[]", "null", ""), True, "nothing to compare: the session holds neither"),
    "what older versions wrote": (
        lambda live, final: ('[{"levels": []}]', "null", ""), True, "nothing to compare"
    ),
    "no verdicts": (lambda live, final: ("[]", final, ""), True, "the same as live: results equal within 1e-9"),
    "cut off": (
        lambda live, final: (json.dumps(json.loads(live)[:120]), "null", ""), True, "the same as live: 120 verdicts"
    ),
    "a verdict too few": (
        lambda live, final: (json.dumps(json.loads(live)[:-1]), final, ""), False, "verdicts stored, "
    ),
    "a verdict changed": (
        lambda live, final: (*changed(live, final, mean_angle_rad=0.0), ""), False,
        "not the same as live: verdict 0 (condition at tick 1501000): mean_angle_rad: 0.0 stored, -0.0",
    ),
    "the last digit": (
        lambda live, final: (*changed(live, final, mean_angle_rad=-0.06979612584880), ""), True, "the same as live: "
    ),
    "another version's": (
        lambda live, final: (live, "{}", "haltere 0.0.1"), True,
        f"worked out by haltere 0.0.1, this is {software()}; not the same as live: levels: nothing stored, ",
    ),
    "another version's, the same": (
        lambda live, final: (live, final, "haltere 0.0.1"), True,
        f"worked out by haltere 0.0.1, this is {software()}; the same as live: ",
    ),
}  # fmt: skip


@pytest.mark.parametrize("what", SAID)
def test_what_is_stored_decides_what_is_said(
    run: tuple[Path, subprocess.CompletedProcess[str]], gone: Gone, tmp_path: Path, what: str
) -> None:
    act, same, sentence = SAID[what]
    copy = tmp_path / "a.h5"
    copy.write_bytes(run[0].read_bytes())
    with h5py.File(copy, "r+") as file:
        live, final = (file[f"results/{name}"][()].decode() for name in ("live", "final"))
        file["results/live"][()], file["results/final"][()], by = act(live, final)
        if by:
            file["results/final"].attrs["software"] = by
    with open_session(copy) as session:
        found = agreement(session, *gone)
    assert found[0] == same and sentence in found[1], found


@pytest.mark.parametrize("speed", ["0", "0.05", "-1", "nan", "inf", "fast"])
def test_speeds_that_are_none(capsys: pytest.CaptureFixture[str], speed: str) -> None:
    assert main(["replay", "nothing.h5", "--speed", speed]) == 2
    told = capsys.readouterr().err
    assert "--speed" in told and told.count("\n") == 1


@pytest.mark.parametrize("speed", [0.1, 3.0, 1e6])
def test_the_pace_is_kept_on_the_clock_given(
    run: tuple[Path, subprocess.CompletedProcess[str]], speed: float, monkeypatch: pytest.MonkeyPatch
) -> None:
    """On a clock that moves only while it is waited on: no sooner, no later, and in steps a person can follow."""
    clock, shown = VirtualClock(100.0), []
    progress = RunProgress(1.0, quiet=True)
    monkeypatch.setattr(
        RunProgress, "__call__", lambda self, time_s, *_: shown.append((time_s, clock.now_s() - 100.0))
    )
    with open_session(run[0]) as session:
        duration_s = session.streams["board"].duration_s
        first = replayed(session, progress, speed, clock)
        assert len(first[0]) == len(session.results["live"])
    assert clock.now_s() - 100.0 == pytest.approx(duration_s / speed, rel=1e-3, abs=0.05)
    begin = shown[0][0]
    for time_s, host_s in shown:
        assert host_s == pytest.approx((time_s - begin) / speed, abs=1e-6)
    steps_s = [later[0] - sooner[0] for sooner, later in itertools.pairwise(shown)]
    assert max(steps_s) <= max(0.02, 0.02 * speed) + 1e-9 and max(steps_s) <= 10.0 + 1e-9
