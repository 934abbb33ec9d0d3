"""A bench process that dies in an analysed interval leaves a board whose drive the next run can change."""

from __future__ import annotations

import time
from pathlib import Path

from test_stand_in_run import SWEEP
from trials import PATIENT, SPIN, Listener, job_for, patient_rig, stand_in, switched_off

from rig.bench.client import BenchClient

#: Two ramps: a register that is still locked lets the run be armed and refuses the first of them.
STEPS = SPIN.replace("60 s", "0.3 s") + '\n[[step]]\ndo = "ramp"\nto = "2 V"\nslew = "20 V/s"\n'


def test_a_run_after_one_that_died_in_a_tap(tmp_path: Path) -> None:
    with stand_in(tmp_path / "served", *PATIENT) as served:
        client = BenchClient(job_for(served, tmp_path / "died.h5", protocol=SWEEP, rig=patient_rig()))
        try:
            heard = Listener(client)
            heard.wait(lambda: heard.event("tap") or heard.last("done"), what="a tap")
            assert heard.last("done") is None, heard.last("done")
            client.process.kill()
            client.process.wait()
            switched_off(served)
            time.sleep(3.0)  # a wheel that still turns lets nobody arm
        finally:
            client.close()
        with BenchClient(job_for(served, tmp_path / "next.h5", protocol=STEPS, rig=patient_rig())) as second:
            heard = Listener(second)
            done = heard.wait(lambda: heard.last("done"), at_most_s=120.0, what="the end of the next run")
        assert done["exit_code"] == 0, done
        targets = [
            line["event"]["target_v"] for line in heard.lines if line.get("event", {}).get("kind") == "drive"
        ]
        assert targets == [3.0, 2.0]
