"""Disks and files that fail a bench process: the drive is off, what was written is good, one sentence tells."""

from __future__ import annotations

import resource
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from trials import (
    PATIENT,
    Listener,
    StandIn,
    job_for,
    patient_rig,
    spin_up,
    stand_in,
    switched_off,
    until,
)

from drivers.clock import HostClock
from rig.bench.client import BenchClient
from rig.bench_source import bench_for
from rig.files.protocol import protocol_from_text
from rig.files.rig import rig_from_text
from rig.record.durability import OsDisk
from rig.record.journal import JournalWriter
from rig.record.recording import read_recording
from rig.run.loop import Loop
from rig.session import open_session


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[StandIn]:
    with stand_in(tmp_path_factory.mktemp("stand-in"), *PATIENT) as one:
        yield one


def test_a_full_disk_ends_the_run_and_keeps_what_is_good(served: StandIn, tmp_path: Path) -> None:
    """The size limit of a process stands for a full disk: writes fail from then on, sealing too."""
    out, journal = tmp_path / "run.h5", tmp_path / "run.journal"
    offs = len(served.of("off"))
    with BenchClient(job_for(served, out, rig=patient_rig())) as client:
        heard = spin_up(client, served, offs)
        heard.wait(lambda: (heard.last("standing") or {}).get("committed_sequence", 0) > 50, what="some rows")
        room = journal.stat().st_size + 30_000
        resource.prlimit(client.pid, resource.RLIMIT_FSIZE, (room, room))

        def look() -> object:
            heard.listen()
            return heard.first("failed")

        failed = until(look, 60.0, "the end")
        assert failed["exit_code"] == 3 and "is kept" in failed["reason"], failed
        stopped = heard.first("stopped")
        assert stopped["exit_code"] == 3 and "cannot be written" in stopped["reason"], stopped
    switched_off(served, offs)
    assert not out.exists() and list(tmp_path.glob(".*")) == []
    recording = read_recording(journal)
    assert recording.losses == [] and len(recording.tick) > 500
    done = subprocess.run(
        [sys.executable, "-m", "rig.command", "recover", str(journal)],
        capture_output=True,
        text=True,
        check=False,
    )
    # What of the last record found no room is lost, and that is told.
    torn = recording.recovery is not None and recording.recovery.torn
    assert done.returncode == (5 if torn else 0), done.stderr
    with open_session(out) as session:
        assert len(session.streams["board"]) == len(recording.tick)


@pytest.mark.parametrize(
    ("out", "words"),
    [
        ("absent/run.h5", "cannot be created"),
        ("file/run.h5", "cannot be created"),
        ("taken.h5", "is there already"),
    ],
)
def test_a_place_where_nothing_can_be_written(served: StandIn, tmp_path: Path, out: str, words: str) -> None:
    (tmp_path / "file").write_text("a file, not a folder", encoding="utf-8")
    (tmp_path / "taken.h5").write_text("somebody else's", encoding="utf-8")
    ons = len(served.of("on"))
    with BenchClient(job_for(served, tmp_path / out)) as client:
        heard = Listener(client)

        def look() -> object:
            heard.listen()
            return heard.first("failed")

        failed = until(look, 60.0, "the refusal")
    assert failed["exit_code"] == 2 and words in failed["reason"], failed
    assert len(served.of("on")) == ons
    assert (tmp_path / "taken.h5").read_text(encoding="utf-8") == "somebody else's"


#: A busy machine may keep this process waiting for the usual 0.2 s.
WATCHDOG_S = 0.5


class SlowDisk(OsDisk):
    """Every write takes as long as the board's watchdog twice over."""

    def write(self, descriptor: int, data: bytes) -> int:
        time.sleep(2.0 * WATCHDOG_S)
        return super().write(descriptor, data)


class NoAnalysis:
    def feed(self, blocks: object, events: object) -> list[object]:
        return []


def test_a_slow_disk_does_not_starve_the_heartbeat(tmp_path: Path) -> None:
    """In real time: were a write waited for, the board would find no heartbeat in its next 1000 rows and latch."""
    clock = HostClock()
    rig = rig_from_text(patient_rig(), "light.toml")
    hold = 'haltere_protocol = 1\n[protocol]\nname = "a"\ntitle = "a"\n'
    hold += '[[step]]\ndo = "ramp"\nto = "3 V"\n[[step]]\ndo = "hold"\nfor = "2 s"\n'
    protocol = protocol_from_text(hold, "hold.toml", rig)
    bench = bench_for(rig, clock, watchdog_s=WATCHDOG_S)
    hello = bench.open()
    header = {"channels": [], "tick_hz": hello.tick_hz}
    journal = JournalWriter(tmp_path / "slow.journal", header, disk=SlowDisk())
    try:
        outcome = Loop(bench, hello, rig, protocol, journal, NoAnalysis(), clock).run()  # type: ignore[arg-type]
    finally:
        journal.close()
        bench.close()
    assert outcome.exit_code == 0, outcome.reason
