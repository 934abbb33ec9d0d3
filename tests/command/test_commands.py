"""The commands as a user types them: each in a process of its own, read by its output and exit code."""

from __future__ import annotations

import json
import os
import re
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import h5py
import numpy as np
import pytest

from rig.shipped import find

QUICK = find("quick")


def haltere(*words: str, cwd: Path | None = None) -> subprocess.CompletedProcess[str]:
    done = subprocess.run(
        [sys.executable, "-m", "rig.command", *words], capture_output=True, text=True, cwd=cwd, check=False
    )
    assert "Traceback" not in done.stderr, done.stderr
    return done


@pytest.fixture(scope="module")
def session(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("quick") / "quick.h5"
    done = haltere(
        "run", "quick", "--rig", "boom", "--out", str(path), "--report", str(path.with_suffix(".html"))
    )
    assert done.returncode == 0, done.stderr
    assert "Cautions for a powered bench" in done.stderr and "not a safety-rated stop" in done.stderr
    assert "boundary falling" in done.stdout
    return path


def analysed(path: Path) -> dict:  # type: ignore[type-arg]
    done = haltere("analyse", str(path), "--json")
    assert done.returncode == 0, done.stderr
    return json.loads(done.stdout)  # type: ignore[no-any-return]


def test_analyse_redoes_the_live_results(session: Path) -> None:
    told = analysed(session)
    with h5py.File(session) as file:
        live = json.loads(file["results/final"][()])
    assert told == live


def test_json_has_the_promised_form(session: Path) -> None:
    told = analysed(session)
    assert set(told) >= {
        "levels", "boundary", "vibration", "passivity", "friction", "theory", "losses", "excluded"
    }  # fmt: skip
    numbers = ("drive_v", "flap_hz", "mean_angle_deg", "load_n", "mode_hz", "decay_per_s", "stiffness_per_s2")
    for level in told["levels"]:
        assert level["direction"] in ("rising", "falling")
        assert level["regime"] in ("stable", "unstable", "undetermined")
        assert level["state"] in ("held", "at_stop", "bouncing", "friction_held", "lost")
        for name in numbers:
            assert set(level[name]) == {"value", "std", "low", "high"}
    assert told["losses"] == {"rows": 0, "frames": 0}
    assert told["theory"]["floquet_hz"] == pytest.approx(25.86, abs=0.02)
    assert told["passivity"]["verdict"] == "supported"
    assert not any(level["regime"] == "stable" and level["state"] != "held" for level in told["levels"])


def test_slow_mode_agrees_with_floquet(session: Path) -> None:
    """At 8 % and more above the fold: mode within 0.02 Hz, decay within 0.05 1/s of Floquet theory."""
    from analysis.floquet import mode_at_voltage
    from rig.files.rig import read_rig

    mechanism = read_rig(find("boom")).mechanism
    assert mechanism is not None
    seen = 0
    for level in analysed(session)["levels"]:
        if level["state"] != "held" or level["flap_hz"]["value"] < 1.08 * 25.86:
            continue
        truth = mode_at_voltage(mechanism, level["drive_v"]["value"], level["winding_deg_c"])
        assert truth is not None
        assert level["mode_hz"]["value"] == pytest.approx(truth.mode_hz, abs=0.02)
        assert level["decay_per_s"]["value"] == pytest.approx(truth.decay_per_s, abs=0.05)
        seen += 1
    assert seen >= 4


def test_a_script_with_h5py_alone_can_redo_the_flap_rate(session: Path) -> None:
    with h5py.File(session) as file:
        board = file["streams/board"]
        crank = board["crank"][:] * board["crank"].attrs["scale"] + board["crank"].attrs["offset"]
        time_s = board["time_s"][:]
        kinds = [kind.decode() for kind in file["events/kind"][:]]
        ticks = file["events/tick"][:]
        data = [json.loads(text) for text in file["events/data"][:]]
        start = next(
            t for t, k, d in zip(ticks, kinds, data, strict=True) if k == "settled" and d["level"] == 2
        )
        end = next(
            t for t, k, d in zip(ticks, kinds, data, strict=True) if k == "level_end" and d["level"] == 2
        )
        rows = slice(*np.searchsorted(board["tick"][:], [start, end]))
    by_hand = (crank[rows][-1] - crank[rows][0]) / (2 * np.pi) / (time_s[rows][-1] - time_s[rows][0])
    assert analysed(session)["levels"][2]["flap_hz"]["value"] == pytest.approx(by_hand, rel=1e-4)


def test_unknown_constants_are_not_testable(session: Path, tmp_path: Path) -> None:
    text = find("boom").read_text(encoding="utf-8")
    rig = tmp_path / "unknown.toml"
    text = text.replace('driver = "simulated"', 'driver = "none"')
    rig.write_text(
        text.replace('body_inertia = "1541.6 g cm^2"', 'body_inertia = "unknown"'), encoding="utf-8"
    )
    done = haltere("analyse", str(session), "--json", "--rig", str(rig))
    assert done.returncode == 0, done.stderr
    told = json.loads(done.stdout)
    assert told["theory"]["floquet_hz"] is None and "body_inertia" in told["theory"]["reason"]
    assert told["vibration"]["verdict"] == "not_testable"
    words = ("--out", str(tmp_path / "x.h5"), "--acknowledge", "A. Person")
    assert haltere("run", "quick", "--rig", str(rig), *words).returncode == 4


def test_report_is_one_page_without_network(session: Path) -> None:
    page = session.with_suffix(".html").read_text(encoding="utf-8")
    assert not re.search(r"(src|href)=[\"']?(https?:)?//", page)
    again = session.with_name("again.html")
    done = haltere("report", str(session), "--out", str(again))
    assert done.returncode == 0 and again.exists()


def test_the_same_seed_gives_the_same_rows(session: Path, tmp_path: Path) -> None:
    done = haltere("run", str(QUICK), "--rig", "boom", "--out", str(tmp_path / "b.h5"), "--quiet")
    assert done.returncode == 0
    with h5py.File(session) as one, h5py.File(tmp_path / "b.h5") as two:
        np.testing.assert_array_equal(one["streams/board/body"][:], two["streams/board/body"][:])
    assert analysed(session)["levels"] == analysed(tmp_path / "b.h5")["levels"]
    assert list(tmp_path.iterdir()) == [tmp_path / "b.h5"]  # no journal, no half file left behind


def test_nothing_is_overwritten(session: Path) -> None:
    before = session.read_bytes()
    done = haltere("run", "quick", "--rig", "boom", "--out", str(session))
    assert done.returncode == 2
    assert "is there already" in done.stderr
    assert session.read_bytes() == before


def test_killed_runs_are_recovered(tmp_path: Path) -> None:
    """kill -9 in mid-run: the journal seals, its rows are contiguous, and it can be analysed."""
    words = [
        sys.executable,
        "-m",
        "rig.command",
        "run",
        "first-sweep",
        "--rig",
        "boom",
        "--out",
        "k.h5",
        "--quiet",
    ]
    process = subprocess.Popen(words, cwd=tmp_path, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    journal = tmp_path / "k.journal"
    deadline = time.monotonic() + 60
    while time.monotonic() < deadline and not (journal.exists() and journal.stat().st_size > 400_000):
        time.sleep(0.02)
    os.kill(process.pid, signal.SIGKILL)
    process.wait()
    assert not (tmp_path / "k.h5").exists()
    again = haltere("run", "first-sweep", "--rig", "boom", "--out", "k.h5", cwd=tmp_path)
    assert again.returncode == 2 and "haltere recover" in again.stderr
    done = haltere("recover", "k.journal", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    with h5py.File(tmp_path / "k.h5") as file:
        ticks = file["streams/board/tick"][:]
        assert len(ticks) > 5000
        assert np.all(np.diff(ticks.astype(np.int64)) == 1000)
        assert file["losses/rows"].shape == (0,)
    assert analysed(tmp_path / "k.h5")["levels"]
    assert haltere("recover", "k.journal", cwd=tmp_path).returncode == 2  # never over what is there


def test_ctrl_c_halts_and_keeps_the_session(tmp_path: Path) -> None:
    words = [
        sys.executable,
        "-m",
        "rig.command",
        "run",
        "first-sweep",
        "--rig",
        "boom",
        "--out",
        "c.h5",
        "--quiet",
    ]
    process = subprocess.Popen(words, cwd=tmp_path, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    journal = tmp_path / "c.journal"
    deadline = time.monotonic() + 60
    while time.monotonic() < deadline and not (journal.exists() and journal.stat().st_size > 300_000):
        time.sleep(0.02)
    process.send_signal(signal.SIGINT)
    _, err = process.communicate(timeout=120)
    assert process.returncode == 3, err
    assert "Traceback" not in err and "operator" in err
    with h5py.File(tmp_path / "c.h5") as file:
        kinds = [kind.decode() for kind in file["events/kind"][:]]
    assert "halt" in kinds and kinds[-1] == "finished"


@pytest.mark.parametrize(
    ("words", "sentence"),
    [
        ((), "COMMAND"),
        (("fly",), "invalid choice"),
        (("run",), "required"),
        (("run", "nothing", "--rig", "boom"), "nothing"),
        (("run", "quick", "--rig", "nothing"), "nothing"),
        (("run", "quick", "--rig", "quick"), "a rig file; this is a protocol"),
        (("run", "quick", "--rig", "boom", "--seed", "x"), "--seed"),
        (("run", "quick", "--rig", "boom", "--out", "/nowhere/x.h5"), "is not a folder"),
        (
            ("run", "quick", "--rig", "boom", "--port", "foo://x", "--acknowledge", "a test"),
            "foo://x cannot be",
        ),
        (("run", "quick", "--rig", "boom", "--port", "socket://a:b", "--acknowledge", "a test"), "HOST:PORT"),
        (("run", "quick", "--rig", "boom", "--port", "", "--acknowledge", "a test"), "--port has no words"),
        (("stand-in", "boom", "--tcp", "99999"), "99999: expected a whole number from 0 to 65535"),
        (("stand-in", "boom", "--tcp", "-1"), "-1: expected a whole number"),
        (("stand-in", "boom", "--tcp", "http"), "http: expected a whole number"),
        (("check", "/"), "a folder"),
        (("analyse", "nothing.h5"), "there is none of that name"),
        (("recover", "nothing.journal"), "there is no file of that name"),
    ],
)
def test_bad_usage_is_one_sentence(words: tuple[str, ...], sentence: str, tmp_path: Path) -> None:
    done = haltere(*words, cwd=tmp_path)
    assert done.returncode == 2
    assert sentence in done.stderr and done.stderr.count("haltere: ") == 1
    assert list(tmp_path.iterdir()) == []


def test_a_port_that_another_stand_in_has_is_one_sentence(tmp_path: Path) -> None:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen(1)
        port = str(taken.getsockname()[1])
        done = haltere("stand-in", "boom", "--tcp", port, cwd=tmp_path)
    assert done.returncode == 4 and done.stdout == ""
    # It says at once that it is busy: compiling takes seconds on a machine that simulates for the first time.
    first, last = done.stderr.splitlines()
    assert first == "preparing the simulated boom ..."
    assert last == f"haltere: TCP port {port} of 127.0.0.1 cannot be used: another program has it"


def test_why_a_run_was_halted_is_told_once(tmp_path: Path) -> None:
    rig = tmp_path / "slow.toml"
    text = find("boom").read_text(encoding="utf-8")
    rig.write_text(re.sub(r'(?m)^flap_rate = ".*?"', 'flap_rate = "12 Hz"', text), encoding="utf-8")
    done = haltere("run", "quick", "--rig", str(rig), "--out", str(tmp_path / "run.h5"), "--quiet")
    assert done.returncode == 3, done.stderr
    assert (done.stdout + done.stderr).count("exceeded 12.00 Hz") == 1
    assert done.stderr.startswith("haltere: At ") and "flap rate" in done.stderr
    assert "The run was halted: At " in haltere("analyse", str(tmp_path / "run.h5")).stdout


def test_damaged_files_are_told_as_damaged(tmp_path: Path) -> None:
    (tmp_path / "a.h5").write_bytes(b"not hdf5 at all")
    (tmp_path / "a.journal").write_bytes(b"HLTRJNL\x01" + b"\x00" * 100)
    for words in (("analyse", "a.h5"), ("report", "a.h5"), ("recover", "a.journal", "--out", "b.h5")):
        done = haltere(*words, cwd=tmp_path)
        assert done.returncode == 5, done.stderr
        assert done.stderr.count("\n") == 1


def test_damage_inside_a_column_is_told_as_damage(session: Path, tmp_path: Path) -> None:
    """Found only when the column is read, long after the file was opened."""
    with h5py.File(session) as file:
        place = file["streams/board/body"].id.get_chunk_info(1).byte_offset + 200
    broken = bytearray(session.read_bytes())
    broken[place] ^= 0x10
    (tmp_path / "a.h5").write_bytes(broken)
    for words in (("analyse", "a.h5"), ("report", "a.h5"), ("replay", "a.h5", "--quiet")):
        done = haltere(*words, cwd=tmp_path)
        assert done.returncode == 5, done.stderr
        *before, last = done.stderr.splitlines()
        assert "/streams/board/body cannot be read" in last
        changed = "haltere: a.h5 is not as it was sealed (streams/board/body): see haltere verify"
        assert before == ([] if words[0] == "replay" else [changed])


def test_check_tells_every_mistake_and_the_forecast(tmp_path: Path) -> None:
    good = haltere("check", "boom", "first-sweep")
    assert good.returncode == 0
    assert "no limit would be crossed" in good.stdout and "coasts for about" in good.stdout
    text = find("boom").read_text(encoding="utf-8")
    bad = tmp_path / "bad.toml"
    bad.write_text(text.replace('"13 V"', '"13,5 V"').replace('"60 Hz"', '"3600 rpm"'), encoding="utf-8")
    done = haltere("check", str(bad), "first-sweep")
    assert done.returncode == 2
    assert done.stderr.count("\n") == 2
    hot = tmp_path / "hot.toml"
    hot.write_text(text.replace('"110 degC"', '"31 degC"').replace('"60 Hz"', '"40 Hz"'), encoding="utf-8")
    done = haltere("check", str(hot), "first-sweep")
    assert done.returncode == 2
    assert done.stdout.count("LIMIT:") >= 2


def test_about(tmp_path: Path) -> None:
    done = haltere("about", "--json")
    told = json.loads(done.stdout)
    assert done.returncode == 0
    assert told["packages_together"] is True
    assert "boom" in told["shipped"]


def test_every_kind_of_step_runs(tmp_path: Path) -> None:
    done = haltere("run", "every-step", "--rig", "boom", "--out", str(tmp_path / "e.h5"))
    assert done.returncode == 0, done.stderr
    assert "check that the guard is closed" in done.stderr
    with h5py.File(tmp_path / "e.h5") as file:
        kinds = {kind.decode() for kind in file["events/kind"][:]}
    assert kinds >= {
        "zero", "prompt", "acknowledged", "armed", "drive", "level", "mark", "sync", "observe", "observe_end",
        "tap", "tap_end", "release", "release_end", "settled", "quiet", "level_end", "halt", "turning",
        "standstill", "finished",
    }  # fmt: skip
