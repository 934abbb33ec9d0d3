"""What the live traces cost: frames a second and share of a core, at 10 kHz x 8 channels in real time.

    python tests/benchmarks/drawing_speed.py [--write]

Another process fills a ring as a bench process does, 20 rows at a time. This one draws four signals, without a screen,
each time its timer asks for it, every 33 ms, and paints each frame whole. Wanted of the span shown at first (2 s):
30 frames a second in no more than 35 % of a core. Shares of a core are those of the whole drawing process; a
calibration unit before and after each span says how fast the machine was. `--write` keeps the result beside this file.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")

import numpy as np
from calibration import kernel_seconds
from PySide6.QtCore import QEvent, QEventLoop, QObject, Qt, QTimer
from PySide6.QtWidgets import QApplication

from drivers.rows import RowBlock
from rig.bench.ring import RingWriter
from rig.desk.model.trace_model import RingSource
from rig.desk.theme import LIGHT
from rig.desk.widgets import style
from rig.desk.widgets.traces import SPAN_S, SPANS_S, TracesView
from rig.files.rig import read_rig
from rig.shipped import find

ROW_HZ, TICK_HZ, BLOCK_ROWS, BINS, ROWS_PER_BIN = 10_000, 1_000_000, 20, 1 << 16, 10
#: Those of the rig file, and two more that the window does not draw.
NAMES = ("body", "crank", "load", "current", "voltage", "carriage", "one", "other")
FLAP_HZ = 30.0
SECONDS, OTHERS_S, SETTLE_S = 20.0, 6.0, 3.0
FRAME_MS = 33
SIZE = (680, 280)


def rows(first: int, count: int) -> np.ndarray:
    """Raw rows of a body that flaps and rings, with converter noise, shape (count, channels)."""
    time_s = np.arange(first, first + count) / ROW_HZ
    turn = 2.0 * np.pi * FLAP_HZ * time_s
    noise = np.random.default_rng(first & 0xFFFF).normal(0.0, 1.0, (count, len(NAMES)))
    made = np.zeros((count, len(NAMES)))
    made[:, 0] = 230.0 + 25.0 * np.sin(turn) + 60.0 * np.sin(2.0 * np.pi * 1.3 * time_s) + 0.3 * noise[:, 0]
    made[:, 1] = 2048.0 * FLAP_HZ * time_s
    for at, (middle, swing, rough) in enumerate(((700.0, 1500.0, 60.0), (2100.0, 600.0, 40.0))):
        made[:, 2 + at] = middle + swing * np.sin(turn * (1 + at)) + rough * noise[:, 2 + at]
    made[:, 4] = 8740.0 + 40.0 * noise[:, 4]
    made[:, 5:] = 8000.0 * np.cos(turn)[:, None] + 10.0 * noise[:, 5:]
    return np.round(made).astype(np.int32)


def fill(path: Path) -> None:
    """Write rows to a ring in real time until killed; those of a minute at once, to begin with."""
    writer = RingWriter(path, NAMES, TICK_HZ, ROWS_PER_BIN, BINS)
    done = 0
    start = time.perf_counter() - 62.0
    print("ready", flush=True)
    while True:
        due = int((time.perf_counter() - start) * ROW_HZ)
        while done + BLOCK_ROWS <= due:
            count = BLOCK_ROWS if due - done < ROW_HZ else ROW_HZ // 10
            tick = np.arange(done, done + count, dtype=np.uint64) * np.uint64(TICK_HZ // ROW_HZ)
            writer.add(RowBlock(tick, rows(done, count), 0, 1))
            done += count
        time.sleep(BLOCK_ROWS / ROW_HZ)


class Painted(QObject):
    """Counts frames with new rows that were really painted, and paintings."""

    def __init__(self, view: TracesView) -> None:
        super().__init__()
        self.view = view
        self.frames = self.paintings = 0
        self._newest = None
        view.canvas.viewport().installEventFilter(self)

    def eventFilter(self, watched: QObject, event: QEvent) -> bool:
        if event.type() == QEvent.Type.Paint:
            self.paintings += 1
            self.frames += self.view.newest != self._newest
            self._newest = self.view.newest
        return False


def measure(view: TracesView, painted: Painted, span_s: float, seconds: float) -> dict:
    view.choose_span(span_s)
    unit_s = kernel_seconds()
    run(SETTLE_S)
    painted.frames = painted.paintings = 0
    start, used = time.perf_counter(), time.process_time()
    run(seconds)
    took, used = time.perf_counter() - start, time.process_time() - used
    unit_s = 0.5 * (unit_s + kernel_seconds())
    drawn = max(painted.frames, 1)
    points = sum(len(chart.course.xs) for chart in view.charts.values())
    return {
        "frames_per_s": round(drawn / took, 1),
        "paintings_per_frame": round(painted.paintings / drawn, 2),
        "core_percent": round(100.0 * used / took, 1),
        "ms_per_frame": round(1e3 * used / drawn, 2),
        "most_frames_per_s": round(drawn / used, 1),  # with a core of its own
        "units_per_frame": round(used / drawn / unit_s, 4),
        "points": points,
    }


def run(seconds: float) -> None:
    """The event loop, for so long; quitting the application would close its window."""
    loop = QEventLoop()
    QTimer.singleShot(round(1e3 * seconds), loop.quit)
    loop.exec()


def main() -> None:
    if len(sys.argv) > 2 and sys.argv[1] == "--fill":
        fill(Path(sys.argv[2]))
    app = QApplication([])
    style.apply(app, LIGHT)
    load = round(
        os.getloadavg()[0], 2
    )  # runnable processes: with more than there are cores, frames come late
    base = "/dev/shm" if Path("/dev/shm").is_dir() else None
    results = {}
    with tempfile.TemporaryDirectory(dir=base) as folder:
        ring = Path(folder) / "ring"
        writer = subprocess.Popen([sys.executable, __file__, "--fill", str(ring)], stdout=subprocess.PIPE)
        try:
            assert writer.stdout is not None
            writer.stdout.readline()
            time.sleep(3.0)
            view = TracesView(LIGHT)
            view.resize(*SIZE)
            view.set_source(RingSource(ring, read_rig(find("boom"))))
            view.show()
            painted = Painted(view)
            timer = QTimer()
            timer.setTimerType(Qt.TimerType.PreciseTimer)
            timer.timeout.connect(view.tick)
            timer.start(FRAME_MS)
            for span_s in (SPAN_S, *(other for other in (*SPANS_S, 0.0) if other != SPAN_S)):
                name = f"{span_s:g} s" if span_s else "folded"
                results[name] = measure(view, painted, span_s, SECONDS if span_s == SPAN_S else OTHERS_S)
                print(name, results[name], flush=True)
            timer.stop()
        finally:
            writer.kill()
            writer.wait()
    told = {
        "load_before": load,
        "row_hz": ROW_HZ,
        "channels": len(NAMES),
        "plots": 4,
        "size": list(SIZE),
        "results": results,
    }
    first = results[f"{SPAN_S:g} s"]
    kept = first["frames_per_s"] >= 30.0 and first["core_percent"] <= 35.0
    print("within the bars" if kept else "NOT within the bars: 30 frames/s in 35 % of a core")
    if "--write" in sys.argv:
        Path(__file__).with_suffix(".json").write_text(json.dumps(told, indent=2) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
