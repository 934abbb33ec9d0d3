"""From the press of a key in the window to the board, at full load: 20 halts in one run on a stand-in.

    .venv/bin/python tests/benchmarks/halt_latency.py [HALTS]

The window draws four traces at its full rate and the rows are recorded and analysed meanwhile. Measured in the board's
ticks, from the newest row the window could know of when the key was pressed to the tick at which the board obeyed: so
it is too long by the age of that row (up to a frame), never too short.
"""

from __future__ import annotations

import json
import os
import statistics
import sys
import tempfile
from pathlib import Path

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
sys.path.insert(0, str(Path(__file__).parents[1] / "bench"))

from PySide6.QtCore import Qt
from PySide6.QtTest import QTest
from trials import SPIN, job_for, stand_in

from rig.bench.ring import RingReader
from rig.desk.entry import application, window


def wait(done: object, seconds: float = 60.0) -> None:
    for _ in range(round(seconds / 0.005)):
        if done():  # type: ignore[operator]
            return
        QTest.qWait(5)
    raise AssertionError("it did not come")


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 20
    latency_ms = []
    application()
    with tempfile.TemporaryDirectory() as folder, stand_in(Path(folder) / "served") as served:
        os.environ["XDG_STATE_HOME"] = folder
        shown = window(Path(folder) / "config", Path(folder) / "state")
        shown.sounds.on = False
        shown.resize(1280, 720)
        shown.show()
        shown.start_run(
            job_for(
                served, Path(folder) / "run.h5", SPIN.replace("60 s", "600 s"), pictures=True, may_go_on=True
            )
        )
        link = shown.link
        assert link is not None
        halts: list[int] = []
        take = link.model._on_halt

        def seen(event: dict[str, object]) -> set[str]:
            halts.append(int(event["tick"]))  # type: ignore[call-overload]
            return take(event)

        link.model._on_halt = seen  # type: ignore[method-assign]
        for number in range(count):
            wait(lambda: link.model.phase == "running" and (link.model.flap_hz or 0.0) > 1.0)
            QTest.qWait(150 + 37 * number % 100)
            reader = RingReader(Path(link.job.ring))
            pressed = reader.header().last_tick
            reader.close()
            QTest.keyPress(shown, Qt.Key.Key_Escape)
            wait(lambda: len(halts) > number)  # noqa: B023
            latency_ms.append((halts[-1] - pressed) / 1e3)
            wait(lambda: link.model.phase == "waiting")
            shown.ask("go_on")
        shown.halt()
        shown.ask("end")
        wait(lambda: link.model.phase == "waiting" or not shown.running)
        shown.ask("end")
        wait(lambda: not shown.running)
        shown.close()
    told = {
        "halts": count,
        "median_ms": round(statistics.median(latency_ms), 1),
        "longest_ms": round(max(latency_ms), 1),
        "all_ms": [round(one, 1) for one in latency_ms],
    }
    print(json.dumps(told))
    Path(__file__).with_suffix(".json").write_text(json.dumps(told, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
