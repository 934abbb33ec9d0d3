"""On a real X server (Xvfb): a trip while the disk takes no more. The halt works, the rows are good, nothing stays."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from rig.record.recording import read_recording

SCRIPT = """
import os, resource, sys
from pathlib import Path
sys.path[:0] = [{desk!r}, {bench!r}]
from PySide6.QtTest import QTest
from PySide6.QtWidgets import QApplication
from rig.desk.entry import application, window
from trials import PATIENT, SPIN, job_for, patient_rig, stand_in

folder = Path({folder!r})
app = application()
assert app.platformName() == "xcb", app.platformName()
shown = window(folder / "config", folder / "state")
shown.sounds.on = False
shown.show()

def wait(done, what):
    for _ in range(9000):
        if done():
            return
        QTest.qWait(10)
    raise SystemExit(f"{{what}} did not come: {{shown.link.model.phase}} {{shown.link.model.reason}}")

with stand_in(folder / "served", *PATIENT) as served:
    shown.start_run(job_for(served, folder / "run.h5", SPIN, rig=patient_rig(), pictures=True, may_go_on=True))
    model = shown.link.model
    wait(lambda: (model.flap_hz or 0.0) > 3.0, "the crank")
    journal = folder / "run.journal"
    room = journal.stat().st_size + 40_000
    resource.prlimit(shown.link.pid, resource.RLIMIT_FSIZE, (room, room))
    served.fault("open_guard")
    wait(lambda: not served.is_on, "the drive's end")
    wait(lambda: not shown.running, "the end of the bench process")
    assert model.reason, model.phase
    print("reason:", model.reason)
    print("outcome:", shown.outcome.text.text())
    shown.grab().save(str(folder / "shown.png"))
    shown.close()
left = Path(f"/proc/{{os.getpid()}}/task/{{os.getpid()}}/children").read_text().split()
print("left:", left)
"""


@pytest.mark.skipif(sys.platform != "linux", reason="Xvfb is of Linux")
def test_a_trip_while_the_disk_fills(tmp_path: Path) -> None:
    run = shutil.which("xvfb-run")
    assert run is not None, "xvfb-run is missing; .ci/run installs it"
    here = Path(__file__).parent
    script = tmp_path / "script.py"
    script.write_text(
        SCRIPT.format(desk=str(here), bench=str(here.parent / "bench"), folder=str(tmp_path)),
        encoding="utf-8",
    )
    environment = {name: value for name, value in os.environ.items() if name != "QT_QPA_PLATFORM"}
    done = subprocess.run(
        [run, "-a", "-s", "-screen 0 1280x720x24", sys.executable, str(script)],
        env={**environment, "XDG_STATE_HOME": str(tmp_path / "xdg")},
        capture_output=True,
        text=True,
        timeout=200,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    assert "left: []" in done.stdout and "outcome: Ended early" in done.stdout
    recording = read_recording(tmp_path / "run.journal")
    assert len(recording) > 100 and recording.losses == []
    assert (tmp_path / "shown.png").stat().st_size > 10_000
