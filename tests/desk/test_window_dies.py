"""Killing or freezing the window never leaves the drive on, and the session is sealed all the same."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from pathlib import Path

import pytest
from trials import PATIENT, stand_in, until

from rig.session import open_session

SCRIPT = """
import sys
from pathlib import Path
sys.path.insert(0, {bench!r})
from rig.desk.entry import application, window
from trials import SPIN, job_for, patient_rig

class Served:
    address = {address!r}

app = application()
folder = Path({folder!r})
shown = window(folder / "config", folder / "state")
shown.sounds.on = False
shown.show()
shown.start_run(job_for(Served(), folder / "run.h5", SPIN, rig=patient_rig(), pictures=True, may_go_on=True))
app.exec()
"""


@pytest.mark.parametrize("how", [signal.SIGKILL, signal.SIGSTOP], ids=["killed", "frozen"])
def test_the_drive_goes_off(tmp_path: Path, how: signal.Signals) -> None:
    with stand_in(tmp_path / "served", *PATIENT) as served:
        bench = str(Path(__file__).parents[1] / "bench")
        script = SCRIPT.format(bench=bench, address=served.address, folder=str(tmp_path))
        shown = subprocess.Popen(
            [sys.executable, "-c", script], env={**os.environ, "QT_QPA_PLATFORM": "offscreen"}
        )
        try:
            until(lambda: served.is_on, what="the drive")
            os.kill(shown.pid, how)
            until(lambda: not served.is_on, what="the drive's end")
            if how is signal.SIGSTOP:
                until(lambda: (tmp_path / "run.journal").exists(), what="the run that waits")
        finally:
            shown.kill()
            shown.wait()
        until(lambda: (tmp_path / "run.h5").exists(), what="the session")
    with open_session(tmp_path / "run.h5") as session:
        halts = [event.data["cause"] for event in session.events if event.kind == "halt"]
    assert len(halts) == 1 and ("silent" if how is signal.SIGSTOP else "has gone") in halts[0], halts
