"""Everything at once: the window draws a run whose bench process records 10 kHz x 8 channels over a pseudo terminal.

    .venv/bin/python tests/benchmarks/window_while_recording.py [--seconds S] [--halts N] [--profile] [--write]

The whole program as a user has it, but without a screen: the window with all its parts, the bench process it starts
(wire, driver, interlocks, journal, ring) and the analysis process. The board is the synthetic stand-in, whose every
sample is known; its crank turns at 20 Hz while frames are counted, so that means over turns are drawn, and rests from
then on. Wanted: 30 frames a second in no more than 35 % of a core for the window's process, and no row lost.

After that the halt key is pressed N times, each in a drive of its own: from the newest row the window could know of to
the tick at which the board obeyed (see `halt_latency.py`). At the end the session is opened and every sample compared.
`--profile` tells where the window's time goes and is no measurement; `--write` keeps the result beside this file.
"""

from __future__ import annotations

import argparse
import cProfile
import json
import os
import pstats
import signal
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from contextlib import ExitStack
from pathlib import Path
from typing import Any

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
sys.path.insert(0, str(Path(__file__).parents[1] / "bench"))

import numpy as np
from calibration import kernel_seconds
from drawing_speed import run
from link_endurance import cpu_s, rig_text
from PySide6.QtCore import QEvent, QObject, Qt
from PySide6.QtTest import QTest
from synthetic_bench import TICK_HZ, samples
from trials import children

from rig.bench.job import Job
from rig.bench.ring import RingReader
from rig.desk.entry import application, window
from rig.desk.link import BenchLink
from rig.desk.widgets.traces import TracesView
from rig.desk.window import Window
from rig.session import open_session

ROW_HZ, FRAME_ROWS, CHANNELS = 10_000, 20, 8
FLAP_HZ = 20.0
SETTLE_S = 6.0
#: Board time taken by starting the bench process, before frames are counted.
BEFORE_S = 15.0
FRAMES_PER_S, CORE_PERCENT = 30.0, 35.0
PROTOCOL = """haltere_protocol = 1
[protocol]
name = "watched"
title = "One level, looked at for long"

[[step]]
do = "staircase"
order = "rising"
levels = ["3 V"]
taps = []
settle = "1 s"
settle_at_most = "1 s"
quiet = "600 s"
"""


class Frames(QObject):
    """When frames with new rows were painted."""

    def __init__(self, view: TracesView) -> None:
        super().__init__()
        self.view = view
        self.at_s: list[float] = []
        self.paintings = 0
        self._newest: int | None = None
        view.canvas.viewport().installEventFilter(self)

    def eventFilter(self, watched: QObject, event: QEvent) -> bool:
        if event.type() == QEvent.Type.Paint:
            self.paintings += 1
            if self.view.newest != self._newest:
                self._newest = self.view.newest
                self.at_s.append(time.perf_counter())
        return False


def wait(done: Callable[[], Any], what: str, seconds: float = 90.0) -> None:
    end_s = time.monotonic() + seconds
    while not done():
        if time.monotonic() > end_s:
            raise AssertionError(f"{what} did not come")
        QTest.qWait(5)


def analysis_of(bench: int) -> int:
    """The analysis process among those the bench process has started (Linux)."""
    for pid in children(bench):
        if b"rig.bench.analysis" in Path(f"/proc/{pid}/cmdline").read_bytes():
            return pid
    raise AssertionError("the bench process has no analysis")


def watch(shown: Window, link: BenchLink, source: int, seconds: float, profile: bool) -> dict[str, Any]:
    """Frames and shares of a core over so many seconds."""
    frames = Frames(shown.run.traces)
    run(SETTLE_S)
    others = {"bench": link.pid, "analysis": analysis_of(link.pid), "far end of the wire": source}
    frames.at_s.clear()
    frames.paintings = 0
    before = {name: cpu_s(pid) for name, pid in others.items()}
    rows = link.model.tick
    profiler = cProfile.Profile()
    start_s, used_s = time.perf_counter(), time.process_time()
    if profile:
        profiler.enable()
    run(seconds)
    profiler.disable()
    took_s, used_s = time.perf_counter() - start_s, time.process_time() - used_s
    shares = {name: 100.0 * (cpu_s(pid) - before[name]) / took_s for name, pid in others.items()}
    if profile:
        pstats.Stats(profiler).sort_stats("tottime").print_stats(35)
        pstats.Stats(profiler).sort_stats("cumtime").print_stats(45)
    gaps_s = np.diff(frames.at_s)
    count = len(frames.at_s)
    return {
        "seconds": round(took_s, 1),
        "board_seconds": round((link.model.tick - rows) / TICK_HZ, 1),
        "frames_per_s": round(count / took_s, 2),
        "paintings_per_frame": round(frames.paintings / max(count, 1), 2),
        "longest_between_frames_ms": round(1e3 * float(gaps_s.max()), 1),
        "99_of_100_frames_within_ms": round(1e3 * float(np.quantile(gaps_s, 0.99)), 1),
        "window_core_percent": round(100.0 * used_s / took_s, 1),
        "window_ms_per_frame": round(1e3 * used_s / max(count, 1), 2),
        **{f"{name.replace(' ', '_')}_core_percent": round(share, 1) for name, share in shares.items()},
    }


def halts(shown: Window, link: BenchLink, count: int) -> list[float]:
    """So many presses of the halt key, ms each until the board obeyed."""
    ticks: list[int] = []
    take = link.model._on_halt

    def seen(event: dict[str, Any]) -> set[str]:
        ticks.append(int(event["tick"]))
        return take(event)

    link.model._on_halt = seen  # type: ignore[method-assign]
    found = []
    for number in range(count):
        wait(lambda: link.model.phase == "running", "the run")
        QTest.qWait(400 + 37 * number % 100)
        reader = RingReader(Path(shown.run._source.path))
        pressed = reader.header().last_tick
        reader.close()
        QTest.keyPress(shown, Qt.Key.Key_Escape)
        wait(lambda: len(ticks) > number, "the halt")  # noqa: B023
        found.append(1e3 * (ticks[-1] - pressed) / TICK_HZ)
        wait(lambda: link.model.phase == "waiting", "standstill")
        if number < count - 1:
            shown.ask("go_on")
    return found


def end(shown: Window, link: BenchLink) -> None:
    if link.model.phase != "waiting":
        shown.halt()
        wait(lambda: link.model.phase == "waiting", "standstill")
    shown.ask("end")
    wait(lambda: not shown.running, "the session", 180.0)


def sealed(path: Path, turns: tuple[float, float]) -> dict[str, Any]:
    """What stands in the session, sample by sample."""
    with open_session(path) as session:
        board = session.streams["board"]
        raw = np.column_stack([board.raw(channel.name) for channel in board.channels])
        clocks = [event.data for event in session.events if event.kind == "clock"]
        return {
            "rows": len(board),
            "every_sample_right": bool(
                np.array_equal(raw, samples(board.tick.astype(np.int64), CHANNELS, *turns))
            ),
            "lost_rows": sum(loss[1] for loss in session.losses),
            "lost_frames": sum(loss[2] for loss in session.losses),
            "longest_gap_ms": round(1e3 * max(clock["longest_gap_s"] for clock in clocks), 1),
            "longest_not_reading_ms": round(1e3 * max(clock["longest_away_s"] for clock in clocks), 1),
        }


def measure(folder: Path, seconds: float, presses: int, profile: bool) -> dict[str, Any]:
    kernel_seconds()  # compiled, and not while the run waits for signs of life from this process
    unit_s = kernel_seconds()
    turns = (FLAP_HZ, BEFORE_S + SETTLE_S + seconds)
    words = [str(word) for word in (ROW_HZ, FRAME_ROWS, CHANNELS, "pty", *turns)]
    with ExitStack() as stack:
        source = subprocess.Popen(
            [sys.executable, str(Path(__file__).with_name("synthetic_bench.py")), *words],
            stdout=subprocess.PIPE,
            text=True,
        )
        stack.callback(source.kill)
        assert source.stdout is not None
        job = Job(
            rig_text=rig_text(ROW_HZ, FRAME_ROWS, CHANNELS),
            rig_name="synthetic.toml",
            protocol_text=PROTOCOL,
            protocol_name="watched.toml",
            out=str(folder / "run.h5"),
            port=source.stdout.readline().strip(),
            pictures=True,
            may_go_on=True,
        )
        shown = window(folder / "config", folder / "state")
        shown.sounds.on = False
        shown.resize(1280, 720)
        shown.show()
        shown.build()
        shown.start_run(job)
        link = shown.link
        assert link is not None, "the files cannot be run"
        wait(lambda: link.model.phase == "running" and shown.run.traces.newest is not None, "the run")
        told = watch(shown, link, source.pid, seconds, profile)
        if link.model.phase != "running":
            trips = [trip.sentence for trip in link.model.trips]
            raise SystemExit(f"the run did not last: {link.model.word}; {trips or link.model.reason}")
        wait(lambda: link.model.tick > turns[1] * TICK_HZ, "the crank's rest")
        latency_ms = halts(shown, link, presses)
        end(shown, link)
        source.send_signal(signal.SIGINT)
        counts = json.loads(source.communicate(timeout=30.0)[0].strip().split("\n")[-1])
        told |= sealed(folder / "run.h5", turns)
        told["window_units_per_frame"] = round(
            told["window_ms_per_frame"] / 1e3 / (0.5 * (unit_s + kernel_seconds())), 4
        )
        told["rows_dropped_by_the_writer"] = counts["rows_dropped"]
        told["writer_paused_s"] = counts["paused_s"]
        if latency_ms:
            told["halts"] = {
                "count": presses,
                "median_ms": round(statistics.median(latency_ms), 1),
                "longest_ms": round(max(latency_ms), 1),
                "all_ms": [round(one, 1) for one in latency_ms],
            }
        shown.close()
    return told


def main() -> None:
    words = argparse.ArgumentParser()
    words.add_argument("--seconds", type=float, default=60.0)
    words.add_argument("--halts", type=int, default=20)
    words.add_argument("--profile", action="store_true")
    words.add_argument("--write", action="store_true")
    parsed = words.parse_args()
    application()
    # Runnable processes: with more than there are cores, frames come late.
    load = round(os.getloadavg()[0], 2)
    with tempfile.TemporaryDirectory() as name:
        os.environ["XDG_STATE_HOME"] = name
        told = measure(Path(name), parsed.seconds, parsed.halts, parsed.profile)
    told = {
        "load_before": load,
        "load_after": round(os.getloadavg()[0], 2),
        "row_hz": ROW_HZ,
        "channels": CHANNELS,
        **told,
    }
    print(json.dumps(told, indent=1))
    kept = (
        told["frames_per_s"] >= FRAMES_PER_S
        and told["window_core_percent"] <= CORE_PERCENT
        and told["lost_rows"] == told["rows_dropped_by_the_writer"] == 0
        and told["every_sample_right"]
    )
    bars = f"{FRAMES_PER_S:g} frames/s in {CORE_PERCENT:g} % of a core, no row lost, every sample right"
    print(f"within the bars ({bars})" if kept else f"NOT within the bars: {bars}")
    if parsed.write:
        Path(__file__).with_suffix(".json").write_text(json.dumps(told, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
