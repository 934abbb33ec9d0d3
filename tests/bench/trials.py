"""Runs on a stand-in that are interrupted in every way, and what must be true afterwards.

Used by the tests for a few of each and by `tests/benchmarks/interruptions.py` for hundreds.
"""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from rig.bench.client import BenchClient
from rig.bench.job import Job
from rig.record.journal import Journal
from rig.record.recording import Recording, read_recording
from rig.shipped import find

#: A boom that spins up and stops within a fraction of a second, so that many runs fit into a minute.
LIGHT = {
    'slew = "1 V/s"': 'slew = "20 V/s"',
    'flywheel_inertia = "2500 g cm^2"': 'flywheel_inertia = "60 g cm^2"',
    'disk_reserve = "100 MB"': 'disk_reserve = "1 MB"',
}
SPIN = """haltere_protocol = 1
[protocol]
name = "spin"
title = "Spin and wait"

[[step]]
do = "ramp"
to = "3 V"
slew = "20 V/s"

[[step]]
do = "hold"
for = "60 s"
"""
LAST_BEAT_S = 0.25  # the drive is off so long after the last heartbeat, at the latest


#: For tests of something else than what they are about: a busy machine may keep a process waiting for 200 ms.
PATIENT = ("--watchdog", "0.5")


def patient_rig() -> str:
    """The light rig, content with rows that come late."""
    return light_rig().replace('stale = "200 ms"', 'stale = "500 ms"')


def light_rig() -> str:
    text = find("boom").read_text(encoding="utf-8")
    for usual, light in LIGHT.items():
        assert usual in text
        text = text.replace(usual, light)
    # A motor that is known to be cold: one of unknown history would soon be too hot for run after run.
    return f'{text}\n[motor]\nstart = "25 degC"\n'


def until(done: Callable[[], Any], at_most_s: float = 60.0, what: str = "it") -> Any:
    """Poll for something a loaded machine may take long to do; its first true value."""
    end = time.monotonic() + at_most_s
    while time.monotonic() < end:
        if found := done():
            return found
        time.sleep(0.01)
    raise AssertionError(f"{what} did not happen within {at_most_s:g} s")


class StandIn:
    """A served stand-in with its log."""

    def __init__(self, folder: Path, *words: str, rig: str | None = None) -> None:
        self.log = folder / "stand-in.log"
        rig_file = folder / "light.toml"
        rig_file.write_text(rig or light_rig(), encoding="utf-8")
        where = words if "--tcp" in words else (*words, "--link", str(folder / "board"))
        self.process = subprocess.Popen(
            [sys.executable, "-m", "rig.command", "stand-in", str(rig_file), "--log", str(self.log), *where],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            text=True,
        )
        assert self.process.stdout is not None
        line = self.process.stdout.readline()
        assert " stands in at " in line, line
        self.address = line.split(" stands in at ")[1].strip()

    def fault(self, text: str) -> None:
        assert self.process.stdin is not None
        self.process.stdin.write(text + "\n")
        self.process.stdin.flush()

    def told(self) -> list[dict[str, Any]]:
        lines = self.log.read_text(encoding="utf-8").split("\n")
        return [json.loads(line) for line in lines[:-1]]

    def of(self, *events: str) -> list[dict[str, Any]]:
        return [fields for fields in self.told() if fields["event"] in events]

    @property
    def is_on(self) -> bool:
        switched = self.of("on", "off")
        return bool(switched) and switched[-1]["event"] == "on"

    def close(self) -> dict[str, Any]:
        """End it; what its far end counted."""
        self.process.send_signal(signal.SIGINT)
        out, _ = self.process.communicate(timeout=30.0)
        counts: dict[str, Any] = json.loads(out.strip().split("\n")[-1])
        return counts


@contextmanager
def stand_in(folder: Path, *words: str, rig: str | None = None) -> Iterator[StandIn]:
    folder.mkdir(parents=True, exist_ok=True)
    served = StandIn(folder, *words, rig=rig)
    try:
        yield served
    finally:
        if served.process.poll() is None:
            served.process.kill()
        served.process.communicate()


def job_for(served: StandIn, out: Path, protocol: str = SPIN, rig: str | None = None, **more: Any) -> Job:
    return Job(
        rig_text=rig or light_rig(),
        rig_name="light.toml",
        protocol_text=protocol,
        protocol_name="spin.toml",
        out=str(out),
        port=served.address,
        acknowledged_by="a test",
        created_utc="2026-01-01T00:00:00+00:00",
        software="haltere 0.1.0",
        **more,
    )


@dataclass
class Listener:
    """Follows a client: keeps what the bench told."""

    client: BenchClient
    lines: list[dict[str, Any]] = field(default_factory=list)

    def listen(self, alive: bool = True) -> None:
        if alive:
            self.client.here()
        self.lines += self.client.messages()

    def first(self, kind: str) -> Any:
        return next((line[kind] for line in self.lines if kind in line), None)

    def last(self, kind: str) -> Any:
        return next((line[kind] for line in reversed(self.lines) if kind in line), None)

    def event(self, kind: str) -> dict[str, Any] | None:
        return next((line["event"] for line in self.lines if line.get("event", {}).get("kind") == kind), None)

    def wait(
        self, done: Callable[[], Any], at_most_s: float = 60.0, what: str = "it", alive: bool = True
    ) -> Any:
        def look() -> Any:
            self.listen(alive)
            if failed := self.first("failed"):
                raise AssertionError(failed)
            return done()

        return until(look, at_most_s, what)


class Starved(Exception):
    """The machine kept a process waiting so long that the board switched off: nothing was tried.

    Safe, as it must be, and no finding of a trial that is about something else.
    """


def spin_up(client: BenchClient, served: StandIn, offs: int) -> Listener:
    """Wait until the drive of a run is up, after `offs` earlier ends; what was heard until then."""
    heard = Listener(client)
    heard.wait(lambda: heard.event("drive") or heard.last("done"), what="the drive")
    until(lambda: served.is_on or served.of("off")[offs:] or heard.last("done"), what="the power stage")
    still_on(served, offs)
    return heard


def still_on(served: StandIn, offs: int) -> None:
    """Starved if the drive has ended, or was refused by a latch, before anything was done to it."""
    if served.of("off")[offs:] or not served.is_on:
        raise Starved("the drive was off before anything was interrupted")


def outlasted(served: StandIn, since: int) -> None:
    """Starved if the board stopped the drive by itself although the bench process was there to do it."""
    told = served.told()[since:]
    if any(line["event"] == "latch" and line.get("cause") == "watchdog" for line in told):
        raise Starved("the board's watchdog was faster than the bench process")


def switched_off(served: StandIn, before: int = 0, at_most_s: float = 60.0) -> dict[str, Any]:
    """Wait until the power stage is off again, after `before` earlier times; what the board told of it."""
    offs = until(lambda: (found := served.of("off"))[before:] and found, at_most_s, "the drive's end")
    last: dict[str, Any] = offs[-1]
    return last


def beat_to_off_s(off: dict[str, Any]) -> float:
    """Board time from the last heartbeat to the first frame without drive."""
    return float((off["tick"] - off["last_heartbeat_tick"]) & 0xFFFFFFFF) / 1e6


def children(pid: int) -> list[int]:
    """Processes started by a process (Linux)."""
    text = Path(f"/proc/{pid}/task/{pid}/children").read_text(encoding="ascii")
    return [int(one) for one in text.split()]


def alive(pid: int) -> bool:
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    stat = Path(f"/proc/{pid}/stat")
    return not stat.exists() or stat.read_text(encoding="ascii").rsplit(")", 1)[1].split()[0] != "Z"


def checked_recording(journal: Path, published: dict[str, Any] | None) -> Recording:
    """The rows of a cut-off journal: contiguous, and reaching what had been published as committed."""
    recording = read_recording(journal)
    assert not recording.damage or recording.damage.startswith("cut off"), recording.damage
    assert recording.losses == []
    tick = recording.tick.astype("int64")
    assert len(tick) < 2 or set((tick[1:] - tick[:-1]).tolist()) == {
        int(recording.header["row_period_ticks"])
    }
    if published is not None:
        last = [record.sequence for record in Journal(journal)][-1]
        assert last >= published["committed_sequence"], "a committed record is not there"
    return recording
