"""One function an interruption: let a run spin, interrupt it at a random moment, check what must be true.

Each takes the stand-in, a folder of its own and the seconds to wait with the drive up; AssertionError tells
what was not true, Starved that the machine was too busy to try it. Each returns the board time from the last
heartbeat to the drive's end, s.
"""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

from trials import (
    LAST_BEAT_S,
    SPIN,
    Listener,
    StandIn,
    Starved,
    alive,
    beat_to_off_s,
    checked_recording,
    children,
    job_for,
    light_rig,
    outlasted,
    spin_up,
    still_on,
    switched_off,
    until,
)

from rig.bench.client import BenchClient
from rig.record.sealing import seal
from rig.session import open_session


def run_for(client: BenchClient, served: StandIn, offs: int, wait_s: float) -> Listener:
    """Let a run spin for a while, with signs of life."""
    heard = spin_up(client, served, offs)
    end = time.monotonic() + wait_s
    while time.monotonic() < end:
        heard.listen()
        time.sleep(0.02)
    still_on(served, offs)
    return heard


def sealed(folder: Path) -> list[str]:
    """Kinds of events of the session a run left; its last one is `finished`."""
    with open_session(folder / "run.h5") as session:
        kinds = [event.kind for event in session.events]
        assert session.losses == []
        assert session.results["final"] is not None
    assert kinds[-1] == "finished", kinds
    return kinds


def ended(heard: Listener) -> dict[str, object]:
    done: dict[str, object] = heard.wait(lambda: heard.last("done"), what="the end of the run")
    return done


def halted(folder: Path, served: StandIn, since: int) -> None:
    """The bench process itself halted the run, and sealed its session."""
    kinds = sealed(folder)
    if "halt" not in kinds:
        outlasted(served, since)
    assert "halt" in kinds, kinds


def taken_down(heard: Listener, served: StandIn, since: int, word: str) -> None:
    """The bench process itself took the drive down, for a reason with this word in it."""
    done = ended(heard)
    if word not in str(done["reason"]):
        outlasted(served, since)
    assert done["exit_code"] == 3 and word in str(done["reason"]), done


def kill_bench(served: StandIn, folder: Path, wait_s: float) -> float:
    """SIGKILL: the board's watchdog takes the drive away, the journal is whole as far as it was committed."""
    offs = len(served.of("off"))
    client = BenchClient(job_for(served, folder / "run.h5"))
    try:
        heard = run_for(client, served, offs, wait_s)
        analysis = heard.first("ready")["analysis_pid"]
        client.process.kill()
        client.process.wait()
        heard.listen()
        off = switched_off(served, offs)
        assert beat_to_off_s(off) <= LAST_BEAT_S
        published = heard.last("standing")
        recording = checked_recording(folder / "run.journal", published)
        assert len(recording.tick) > 0
        seal(folder / "run.journal", folder / "run.h5", keep_journal=True)
        with open_session(folder / "run.h5") as session:
            assert len(session.streams["board"]) == len(recording.tick)
        until(lambda: not alive(analysis), what="the end of the orphaned analysis")
        return beat_to_off_s(off)
    finally:
        client.close()


def kill_analysis(served: StandIn, folder: Path, wait_s: float) -> float:
    """SIGKILL of the analysis: the drive is ramped down, a new analysis works out the results."""
    offs, since = len(served.of("off")), len(served.told())
    with BenchClient(job_for(served, folder / "run.h5")) as client:
        heard = run_for(client, served, offs, wait_s)
        os.kill(heard.first("ready")["analysis_pid"], signal.SIGKILL)
        taken_down(heard, served, since, "analysis")
        off = switched_off(served, offs)
    halted(folder, served, since)
    return beat_to_off_s(off)


def kill_client(served: StandIn, folder: Path, wait_s: float) -> float:
    """SIGKILL of the command: the end of its pipe halts the bench, which seals the session."""
    offs, since = len(served.of("off")), len(served.told())
    rig, protocol = folder / "light.toml", folder / "spin.toml"
    rig.write_text(light_rig(), encoding="utf-8")
    protocol.write_text(SPIN, encoding="utf-8")
    words = [
        "run",
        str(protocol),
        "--rig",
        str(rig),
        "--port",
        served.address,
        "--acknowledge",
        "a test",
        "--quiet",
    ]
    client = subprocess.Popen([sys.executable, "-m", "rig.command", *words, "--out", str(folder / "run.h5")])
    try:
        ons = len(served.of("on"))
        until(
            lambda: served.is_on or len(served.of("on")) > ons or client.poll() is not None, what="the drive"
        )
        bench = children(client.pid)[0]
        time.sleep(wait_s)
        still_on(served, offs)
        client.kill()
        client.wait()
        off = switched_off(served, offs)
        until(lambda: not alive(bench), what="the end of the bench process")
    finally:
        client.kill()
        client.wait()
    halted(folder, served, since)
    return beat_to_off_s(off)


def freeze_bench(served: StandIn, folder: Path, wait_s: float) -> float:
    """SIGSTOP: the watchdog acts; when the bench process goes on it finds the latch and ends."""
    offs = len(served.of("off"))
    with BenchClient(job_for(served, folder / "run.h5")) as client:
        heard = run_for(client, served, offs, wait_s)
        os.kill(client.pid, signal.SIGSTOP)
        try:
            off = switched_off(served, offs)
            assert beat_to_off_s(off) <= LAST_BEAT_S
        finally:
            os.kill(client.pid, signal.SIGCONT)
        done = ended(heard)
        assert done["exit_code"] in (3, 4), done
    with open_session(folder / "run.h5") as session:
        assert "trip" in [event.kind for event in session.events]
    return beat_to_off_s(off)


def freeze_analysis(served: StandIn, folder: Path, wait_s: float) -> float:
    """SIGSTOP of the analysis: after some seconds the drive is ramped down."""
    offs, since = len(served.of("off")), len(served.told())
    with BenchClient(job_for(served, folder / "run.h5")) as client:
        heard = run_for(client, served, offs, wait_s)
        frozen = heard.first("ready")["analysis_pid"]
        os.kill(frozen, signal.SIGSTOP)
        try:
            heard.wait(lambda: heard.event("halt") or heard.last("done"), what="the halt")
            off = heard.wait(lambda: served.of("off")[offs:], what="the drive's end")[-1]
        finally:
            os.kill(frozen, signal.SIGCONT)
        taken_down(heard, served, since, "analysis")
    sealed(folder)
    return beat_to_off_s(off)


def freeze_client(served: StandIn, folder: Path, wait_s: float) -> float:
    """No sign of life while the pipe is open: the drive is ramped down after a second."""
    offs, since = len(served.of("off")), len(served.told())
    with BenchClient(job_for(served, folder / "run.h5")) as client:
        heard = run_for(client, served, offs, wait_s)
        off = switched_off(served, offs)
        taken_down(heard, served, since, "silent")
    halted(folder, served, since)
    return beat_to_off_s(off)


def close_pipe(served: StandIn, folder: Path, wait_s: float) -> float:
    """The control pipe is closed: a halt, then standstill, then a sealed session."""
    offs, since = len(served.of("off")), len(served.told())
    with BenchClient(job_for(served, folder / "run.h5")) as client:
        run_for(client, served, offs, wait_s)
        assert client.close() == 3
    halted(folder, served, since)
    return beat_to_off_s(switched_off(served, offs))


def unplug(served: StandIn, folder: Path, wait_s: float) -> float:
    """The cable is pulled: the board's watchdog acts, the run ends with exit code 4 and its rows."""
    return _link_fails(served, folder, wait_s, "unplug", "plug_in")


def reset_board(served: StandIn, folder: Path, wait_s: float) -> float:
    """The board is reset: it comes back with the drive off, and the run is over."""
    return _link_fails(served, folder, wait_s, "reset", "")


def cut_power(served: StandIn, folder: Path, wait_s: float) -> float:
    """Board and motor lose their supply and get it back: the drive stays off until it is armed anew."""
    off_s = _link_fails(served, folder, wait_s, "power_off", "power_on")
    ons = len(served.of("on"))
    time.sleep(1.0)
    assert not served.is_on and len(served.of("on")) == ons
    return off_s


def _link_fails(served: StandIn, folder: Path, wait_s: float, fault: str, repair: str) -> float:
    offs, since = len(served.of("off")), len(served.told())
    with BenchClient(job_for(served, folder / "run.h5")) as client:
        heard = run_for(client, served, offs, wait_s)
        served.fault(fault)
        off = switched_off(served, offs)
        done = ended(heard)
        assert done["exit_code"] == 4, done
    if repair:
        served.fault(repair)
    halted(folder, served, since)
    assert beat_to_off_s(off) <= LAST_BEAT_S
    return beat_to_off_s(off)


INTERRUPTIONS: dict[str, Callable[[StandIn, Path, float], float]] = {
    "kill -9 of the bench": kill_bench,
    "kill -9 of the analysis": kill_analysis,
    "kill -9 of the client": kill_client,
    "bench frozen": freeze_bench,
    "analysis frozen": freeze_analysis,
    "client frozen": freeze_client,
    "control pipe closed": close_pipe,
    "port unplugged": unplug,
    "board reset": reset_board,
    "power lost and restored": cut_power,
}


def interrupt(name: str, served: StandIn, folder: Path, wait_s: float, tries: int = 5) -> tuple[float, int]:
    """One interruption that really was one: s from the last heartbeat to the drive's end, and starved tries."""
    for starved in range(tries):
        place = folder / f"try-{starved}"
        place.mkdir()
        try:
            return INTERRUPTIONS[name](served, place, wait_s), starved
        except Starved:
            time.sleep(2.0)  # the machine is busy, and the wheel may still turn
    raise AssertionError(f"the machine was too busy in {tries} tries of {tries}")
