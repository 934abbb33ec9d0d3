"""A protocol over a real line: what the run told live, what a replay tells and what an analysis tells agree."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest
from trials import LIGHT, PATIENT, SPIN, Listener, job_for, light_rig, patient_rig, stand_in, until

from rig.bench.client import BenchClient
from rig.evaluation.comparison import first_difference, told_verdicts, verdict_difference
from rig.evaluation.replay import Replay
from rig.session import open_session
from rig.verdicts import verdict_to_json

SWEEP = """haltere_protocol = 1
[protocol]
name = "short"
title = "One level with taps"

[[step]]
do = "zero"
for = "0.3 s"

[[step]]
do = "staircase"
order = "rising"
levels = ["9 V"]
taps = ["0.1 mN m s", "-0.1 mN m s"]
settle = "1 s"
settle_at_most = "2 s"
quiet = "1 s"
tap_observe = "2 s"
"""


def command(*words: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "rig.command", *words],
        capture_output=True,
        text=True,
        timeout=200,
        check=False,
    )


@pytest.mark.parametrize("where", ["pty", "tcp"])
def test_live_replay_and_analysis_agree(tmp_path: Path, where: str) -> None:
    words = (*PATIENT, "--tcp", "0") if where == "tcp" else PATIENT
    out = tmp_path / "run.h5"
    with stand_in(tmp_path / "served", *words) as served:
        with BenchClient(job_for(served, out, protocol=SWEEP, rig=patient_rig())) as client:
            heard = Listener(client)
            done = heard.wait(lambda: heard.last("done"), at_most_s=150.0, what="the end of the run")
        counts = served.close()
    assert done["exit_code"] == 0, done
    live = [line["verdict"] for line in heard.lines if "verdict" in line]
    with open_session(out) as session:
        assert session.losses == [] and counts["rows_dropped"] == 0
        final = session.results["final"]
        assert told_verdicts(session.results["live"]) == live
        assert session.header["port"] == served.address and session.header["driver"] == "board"
        taps = [tap for tap in final["taps"] if tap["accepted"]]
        assert len(taps) == 2
        results = set()
        for rows in (1, 7, 997, 100_000):
            replay = Replay(session.rig, session.streams["board"], session.events)
            for _ in replay.steps(rows):
                pass
            now = [verdict_to_json(verdict) for verdict in replay.verdicts]
            assert verdict_difference(live, now, complete=True) == ""
            result = replay.finish().to_json()
            assert first_difference(final, json.loads(json.dumps(result))) == ""
            results.add(json.dumps(result))
        assert len(results) == 1
    analysed = command("analyse", "--json", str(out))
    assert first_difference(final, json.loads(analysed.stdout)) == ""
    replayed = command("replay", str(out), "--quiet")
    assert replayed.returncode == 0 and "the same as live" in replayed.stdout


def test_the_command_on_a_port(tmp_path: Path) -> None:
    rig, protocol, out = tmp_path / "light.toml", tmp_path / "short.toml", tmp_path / "run.h5"
    rig.write_text(patient_rig(), encoding="utf-8")
    protocol.write_text(SPIN.replace("60 s", "0.5 s"), encoding="utf-8")
    with stand_in(tmp_path / "served", *PATIENT) as served:
        run = ("run", str(protocol), "--rig", str(rig), "--port", served.address, "--out", str(out))
        refused = command(*run)
        assert refused.returncode == 2 and "--acknowledge" in refused.stderr
        done = command(*run, "--acknowledge", "a test")
        assert done.returncode == 0, done.stderr
        assert "Off does not mean stopped" in done.stderr and str(out) in done.stdout
        again = command(*run, "--acknowledge", "a test")
        assert again.returncode == 2 and "is there already" in again.stderr
    gone = command(*run[:-1], str(tmp_path / "other.h5"), "--acknowledge", "a test")
    assert gone.returncode == 4 and "there is no such port" in gone.stderr
    assert not (tmp_path / "other.h5").exists() and not (tmp_path / "other.journal").exists()


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("counts_per_turn = 8192", "counts_per_turn = 4096"), "'body'"),
        (("[channel.load]", "[channel.cell]"), "'cell'"),
        (('sample_rate = "1 kHz"', 'sample_rate = "2 kHz"'), "rows a second"),
    ],
)
def test_another_board_than_the_rig_file_describes(
    tmp_path: Path, change: tuple[str, str], words: str
) -> None:
    with stand_in(tmp_path / "served") as served:
        other = light_rig().replace(*change)
        with BenchClient(job_for(served, tmp_path / "run.h5", rig=other)) as client:
            heard = Listener(client)
            failed = until_failed(heard)
        assert failed["exit_code"] == 4 and words in failed["reason"], failed
        assert served.of("on") == []
    assert list(tmp_path.glob("run*")) == []


def until_failed(heard: Listener) -> dict[str, object]:
    def look() -> object:
        heard.listen()
        return heard.first("failed")

    failed: dict[str, object] = until(look, 60.0, "the refusal")
    return failed


def test_two_runs_on_one_board_or_one_file(tmp_path: Path) -> None:
    with stand_in(tmp_path / "served", *PATIENT) as served:
        with BenchClient(job_for(served, tmp_path / "run.h5", rig=patient_rig())) as first:
            heard = Listener(first)
            heard.wait(lambda: heard.event("drive"), what="the first run")
            with BenchClient(job_for(served, tmp_path / "other.h5")) as second:
                failed = until_failed_meanwhile(heard, Listener(second))
            assert failed["exit_code"] == 4 and "another program has it open" in failed["reason"]
            first.input("halt")
            done = heard.wait(lambda: heard.last("done"), what="the end")
        assert done["exit_code"] == 3 and done["reason"] == "halted by the operator"
        with open_session(tmp_path / "run.h5") as session:
            assert session.losses == []


def until_failed_meanwhile(first: Listener, second: Listener) -> dict[str, str]:
    def look() -> object:
        first.listen()
        second.listen()
        return second.first("failed")

    failed: dict[str, str] = until(look, 60.0, "the refusal")
    return failed


def test_light_rig_differs_where_it_should() -> None:
    text = light_rig()
    assert all(light in text for light in LIGHT.values())
