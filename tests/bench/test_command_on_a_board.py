"""What `haltere run` says on a board: what was kept from it, a board of another name, lines that were damaged."""

from __future__ import annotations

import fcntl
import os
import signal
import subprocess
import sys
import threading
import tty
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest
from trials import (
    PATIENT,
    SPIN,
    StandIn,
    alive,
    children,
    patient_rig,
    stand_in,
    until,
)

from rig.session import open_session

SHORT = SPIN.replace("60 s", "1.5 s")
SAMPLER = """
[sampler.strain]
port = "{port}"
delimiter = "comma"

[sampler.strain.column.force]
measures = "vertical load"
per_count = "1 mN"
"""


def begun(
    folder: Path, served: StandIn, *more: str, rig: str = "", protocol: str = SHORT
) -> subprocess.Popen[str]:
    """A run on a stand-in, as a command of its own, with its session at run.h5."""
    folder.mkdir(exist_ok=True)
    (folder / "rig.toml").write_text(rig or patient_rig(), encoding="utf-8")
    (folder / "spin.toml").write_text(protocol, encoding="utf-8")
    words = ["run", "spin.toml", "--rig", "rig.toml", "--port", served.address, "--acknowledge", "a test"]
    return subprocess.Popen(
        [sys.executable, "-m", "rig.command", *words, "--out", "run.h5", *more],
        cwd=folder,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


@contextmanager
def printer(good: int) -> Iterator[str]:
    """The port of a device that prints a number every 10 ms and something else after every `good` of them."""
    master, slave = os.openpty()
    tty.setraw(slave)
    ending = threading.Event()

    def run() -> None:
        number = 0
        while not ending.wait(0.01):
            number += 1
            os.write(master, b"1.2.3\n" if number % good == 0 else b"%d\n" % number)

    thread = threading.Thread(target=run)
    thread.start()
    try:
        yield os.ttyname(slave)
    finally:
        ending.set()
        thread.join()
        os.close(master)
        os.close(slave)


def narrowed(one: int, other: int) -> None:
    """Shrink the pipes between two processes (Linux): they fill up as those of a run that goes on for minutes do."""
    ends = [{str(fd.readlink()): fd for fd in Path(f"/proc/{pid}/fd").iterdir()} for pid in (one, other)]
    for name in ends[0].keys() & ends[1].keys() - {str(Path(f"/proc/{other}/fd/2").readlink())}:
        if name.startswith("pipe:"):
            pipe = os.open(ends[0][name], os.O_RDWR | os.O_NONBLOCK)
            fcntl.fcntl(pipe, fcntl.F_SETPIPE_SZ, 4096)
            os.close(pipe)


@pytest.mark.parametrize("full", [False, True])
def test_a_command_that_was_stopped_tells_what_the_bench_did_meanwhile(tmp_path: Path, full: bool) -> None:
    with stand_in(tmp_path / "served", *PATIENT) as served:
        run = begun(tmp_path, served, protocol=SPIN)
        try:
            until(lambda: served.is_on or run.poll() is not None, what="the drive")
            assert run.poll() is None, run.communicate()
            bench = children(run.pid)[0]
            os.kill(run.pid, signal.SIGSTOP)
            try:
                if full:
                    narrowed(run.pid, bench)
                until(lambda: not alive(bench), what="the end of the bench process")
                assert (tmp_path / "run.h5").exists()
            finally:
                os.kill(run.pid, signal.SIGCONT)
            out, err = run.communicate(timeout=120)
        finally:
            run.kill()
            run.wait()
    assert run.returncode == 3, err
    assert err.splitlines()[-1].startswith("haltere: the program that runs this bench has been silent for ")
    assert "has died" not in err and "session: run.h5" in out


def test_a_bench_process_that_died_is_told_as_dead(tmp_path: Path) -> None:
    with stand_in(tmp_path / "served", *PATIENT) as served:
        run = begun(tmp_path, served, "--quiet", protocol=SPIN)
        try:
            until(lambda: served.is_on or run.poll() is not None, what="the drive")
            os.kill(children(run.pid)[0], signal.SIGKILL)
            _, err = run.communicate(timeout=120)
        finally:
            run.kill()
            run.wait()
    assert run.returncode == 4
    assert err.count("\n") == 1  # and nothing else: it was to be quiet
    assert "the bench process has died; the board cuts the drive by itself" in err
    assert "its rows are sealed in" in err
    with open_session(tmp_path / "run.h5") as session:
        assert "finished" not in [event.kind for event in session.events]


def test_a_board_of_another_name_and_damaged_lines_are_told(tmp_path: Path) -> None:
    with stand_in(tmp_path / "served", *PATIENT) as served, printer(good=20) as port:
        other = patient_rig().replace('name = "boom"', 'name = "beam"') + SAMPLER.format(port=port)
        run = begun(tmp_path / "beam", served, rig=other)
        out, err = run.communicate(timeout=120)
        assert run.returncode == 0, err
        plain = begun(tmp_path / "boom", served)
        plain_out, plain_err = plain.communicate(timeout=120)
        assert plain.returncode == 0, plain_err
    words = "the board calls itself 'boom (stand-in)', the rig file is for 'beam'"
    told = err.splitlines()
    assert [line.strip() for line in told if "calls itself" in line] == [f">>> {words}"]
    # Nothing comes for some seconds before the first row: that is said in time.
    at = told.index(f"preparing the run on {served.address} ...")
    assert at < next(place for place, line in enumerate(told) if "calls itself" in line)
    with open_session(tmp_path / "beam" / "run.h5") as session:
        notices = [event.data for event in session.events if event.kind == "notice"]
        assert {"notice": "other_board", "text": words} in notices
        damaged = session.samplers["strain"].damaged_lines
    assert damaged > 1 and f"{damaged} damaged lines of sampler strain were left out" in out.splitlines()
    assert "calls itself" not in plain_err and "damaged" not in plain_out


def test_a_second_run_on_a_tcp_port_is_told_of_the_first(tmp_path: Path) -> None:
    with stand_in(tmp_path / "served", *PATIENT, "--tcp", "0") as served:
        first = begun(tmp_path / "first", served, protocol=SPIN)
        try:
            until(lambda: served.is_on or first.poll() is not None, what="the drive")
            second = begun(tmp_path / "second", served, "--quiet")
            _, err = second.communicate(timeout=120)
            assert second.returncode == 4 and err.count("\n") == 1
            assert "or another program has it" in err and served.address in err
        finally:
            first.kill()
            first.communicate()
