"""A second device that prints lines is recorded beside the board, and its failure ends nothing."""

from __future__ import annotations

import os
import threading
import time
import tty
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from trials import PATIENT, SPIN, Listener, StandIn, job_for, patient_rig, stand_in, until

from drivers.clock import HostClock
from drivers.text_lines import TextColumn, TextSampler
from rig.bench.client import BenchClient
from rig.bench.samplers import Samplers
from rig.command.sessions import software
from rig.session import open_session
from rig.verification.verify import verify

SAMPLER = """
[sampler.strain]
port = "{port}"
delimiter = "comma"
tick_rate = "1 kHz"

[sampler.strain.column.clock]
measures = "tick"

[sampler.strain.column.force]
measures = "vertical load"
per_count = "1 mN"
zero = "0.2 N"
"""


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[StandIn]:
    with stand_in(tmp_path_factory.mktemp("stand-in"), *PATIENT) as one:
        yield one


class Printer:
    """A device on a pseudo-terminal that prints a line every 10 ms: its tick, and 250 mN and so on."""

    def __init__(self) -> None:
        self._master, self._slave = os.openpty()
        tty.setraw(self._slave)
        self.port = os.ttyname(self._slave)
        self._ending = threading.Event()
        self._thread = threading.Thread(target=self._run)
        self._thread.start()

    def _run(self) -> None:
        number = 0
        while not self._ending.wait(0.01):
            line = b"rubbish\n" if number % 50 == 49 else f"{10 * number},{250 + number % 7}\r\n".encode()
            os.write(self._master, line)
            number += 1

    def stop(self) -> None:
        self._ending.set()
        self._thread.join()
        for descriptor in (self._master, self._slave):
            os.close(descriptor)


def test_text_lines_beside_the_board(served: StandIn, tmp_path: Path) -> None:
    printer = Printer()
    rig = patient_rig() + SAMPLER.format(port=printer.port)
    with BenchClient(job_for(served, tmp_path / "run.h5", SPIN.replace("60 s", "4 s"), rig=rig)) as client:
        heard = Listener(client)
        heard.wait(lambda: heard.event("drive"), what="the drive")
        end = time.monotonic() + 1.5
        while time.monotonic() < end:
            heard.listen()
            time.sleep(0.02)
        printer.stop()  # unplugged in mid-run
        done = heard.wait(lambda: heard.last("done"), what="the end")
    assert done["exit_code"] == 0, done
    told = [str(line["prompt"]) for line in heard.lines if "strain" in str(line.get("prompt"))]
    assert told == [
        f"sampler strain has failed: the line to the sampler is down ({printer.port}): unplugged, or its device "
        "has gone; the run goes on without it"
    ]
    with open_session(tmp_path / "run.h5") as session:
        rows = session.samplers["strain"]
        force, time_s = rows["force"], rows.time_s
        assert len(force) > 100 and rows.damaged_lines >= 2
        assert rows.unit("force") == "N" and "never used by interlocks" in rows.limits
        assert set(np.round(force, 6)) <= {round(0.050 + 0.001 * step, 6) for step in range(7)}
        assert np.all(np.diff(time_s) >= 0.0) and -1.0 < time_s[0] < time_s[-1] < 6.0
        assert "strain" in [one["name"] for one in session.header["samplers"]]
    checks = verify(tmp_path / "run.h5", software(), lambda session: session.rig)
    assert [check.name for check in checks if check.outcome == "wrong"] == [], checks


class NoJournal:
    def samples(self, samples: object) -> None:
        pass


@pytest.mark.parametrize("running", [True, False])
def test_a_failed_sampler_is_told_once_and_in_the_state_the_run_is_in(running: bool) -> None:
    printer = Printer()
    column = TextColumn("force", "vertical load", "N", 1e-3)
    described = TextSampler("strain", printer.port, (column,), tick_column=0, tick_hz=1000.0)
    samplers = Samplers([described], HostClock(), 1_000_000)
    journal: Any = NoJournal()
    assert samplers.write(journal, 0, running) == []
    printer.stop()
    (told,) = until(lambda: samplers.write(journal, 0, running), what="the failure")
    assert told.startswith("sampler strain has failed: the line to the sampler is down")
    assert told.endswith("the run goes on without it") == running
    assert samplers.write(journal, 0, running) == []
    samplers.close()


def test_a_sampler_that_is_not_there_is_told_before_power(served: StandIn, tmp_path: Path) -> None:
    ons = len(served.of("on"))
    rig = patient_rig() + SAMPLER.format(port=str(tmp_path / "absent"))
    with BenchClient(job_for(served, tmp_path / "run.h5", rig=rig)) as client:
        heard = Listener(client)
        end = time.monotonic() + 60.0
        while not heard.first("failed") and time.monotonic() < end:
            heard.listen()
            time.sleep(0.02)
        failed = heard.first("failed")
    assert failed["exit_code"] == 4 and "there is no such port" in failed["reason"]
    assert len(served.of("on")) == ons
