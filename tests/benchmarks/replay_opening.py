"""An hour of 10 kHz x 8 channels opened in the window, and jumps in it: how long until all is painted.

    .venv/bin/python tests/benchmarks/replay_opening.py [--session FILE] [--rounds N] [--write]

The session (`hour_session.py`) has a run's own events, verdicts and results, dozens of levels and hundreds of taps.
Each round opens it in a process of its own: as `haltere replay SESSION --desk` does, with the file in the system's
cache and without, and from the first page of a window that has loaded nothing for it yet. Told is the time from asking
the window to the first painting with everything in it - traces with rows, ladder, map, tap, controls - and, for the
command, from its start; and once more in a window that has had a session open. Wanted: 1.5 s from asking.

Then come 40 jumps, by time, event, tap and at random, each until the traces of the new place and whatever else it has
changed are painted. Wanted: 0.2 s each. The picture of a tap is fitted in a process beside it and told for itself. Peak
memory is that of the window's whole process. `--write` keeps the result beside this file.
"""

from __future__ import annotations

import argparse
import json
import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")

import numpy as np
from PySide6.QtCore import QEvent, QEventLoop, QObject, QTimer
from PySide6.QtTest import QTest

if TYPE_CHECKING:
    from rig.desk.window import Window

ROUNDS, JUMPS, OPEN_S, JUMP_S = 5, 40, 1.5, 0.2
WAYS = ("by command", "by command, from disk", "from the first page")
AT_MOST_S = 60.0


class Painted(QObject):
    """Which parts of the run page have been painted since they were last forgotten, and when all that is wanted was."""

    def __init__(self, shown: Window) -> None:
        super().__init__()
        run = shown.run
        self.parts: dict[QObject, str] = {
            run.traces.canvas.viewport(): "traces",
            run.ladder: "ladder",
            run.map.canvas.viewport(): "map",
            run.tap.canvas.viewport(): "tap",
            run.status: "status",
            shown.replay_bar.slider: "controls",
        }
        self.traces = run.traces
        self.seen: set[str] = set()
        self.newest: int | None = None  # of the rows in the traces as painted
        self._loop = QEventLoop()
        self._wanted: Callable[[], object] = lambda: False
        self._done_s: float | None = None
        for part in self.parts:
            part.installEventFilter(self)

    def forget(self) -> None:
        self.seen.clear()
        self.newest = None

    def wait(self, wanted: Callable[[], object]) -> float:
        """Let the window work until what is wanted has been painted; when the painting was over, s."""
        self._wanted, self._done_s = wanted, None
        QTimer.singleShot(round(1e3 * AT_MOST_S), self._loop.quit)
        self._loop.exec()
        if self._done_s is None:
            raise AssertionError(f"not painted within {AT_MOST_S:g} s; painted were {sorted(self.seen)}")
        return self._done_s

    def eventFilter(self, watched: QObject, event: QEvent) -> bool:
        if event.type() == QEvent.Type.Paint:
            name = self.parts[watched]
            self.seen.add(name)
            if name == "traces":
                self.newest = self.traces.newest
            QTimer.singleShot(0, self._over)  # all parts are painted in one go, before any timer
        return False

    def _over(self) -> None:
        if self._done_s is None and self._wanted():
            self._done_s = time.perf_counter()
            self._loop.quit()


def opening(shown: Window, path: Path) -> tuple[dict[str, float], Painted]:
    """Ask for the session as the command does, and wait for the first full painting."""
    asked_s = time.perf_counter()
    assert shown.open_replay(str(path)), shown.statusBar().currentMessage()
    returned_s = time.perf_counter()
    painted = Painted(shown)
    everything = set(painted.parts.values())
    done_s = painted.wait(lambda: everything <= painted.seen and painted.newest is not None)
    return {"painted_s": done_s - asked_s, "call_s": returned_s - asked_s}, painted


def jumps(shown: Window, painted: Painted, count: int) -> dict[str, list[float]]:
    """Seconds from wish to painting of jumps of every kind, each wished for through the controls."""
    replaying, bar = shown.replaying, shown.replay_bar
    assert replaying is not None
    player = replaying.player
    random = np.random.default_rng(3)
    bar.play.emit(False)
    QTest.qWait(200)

    def by_time(number: int) -> None:
        bar.slider.setValue(round(bar.slider.maximum() * (number + 0.5) / count))

    def by_chance(number: int) -> None:
        bar.seek.emit(float(random.uniform(0.0, player.duration_s)))

    def by_event(number: int) -> None:
        bar.step_event.emit(-1 if number % 3 == 2 else 1)

    def by_tap(number: int) -> None:
        bar.step_tap.emit(-1 if number % 3 == 2 else 1)

    took: dict[str, list[float]] = {}
    kinds = {"time": by_time, "event": by_event, "tap": by_tap, "random": by_chance}
    for number in range(count):
        name = list(kinds)[number % len(kinds)]
        before = player.position_s
        painted.forget()
        asked_s = time.perf_counter()
        kinds[name](number)
        assert player.position_s != before, f"no jump by {name}"
        tick = player.model.tick
        done_s = painted.wait(lambda: painted.newest == tick)  # noqa: B023
        took.setdefault(name, []).append(done_s - asked_s)
    return took


def tap_pictures(shown: Window, painted: Painted, count: int) -> list[float]:
    """Seconds from choosing taps all over the session to their pictures, fitted and painted."""
    replaying, tap = shown.replaying, shown.run.tap
    assert replaying is not None
    shown.replay_bar.seek.emit(replaying.player.duration_s)
    numbers = [number for number, _ in replaying.player.taps()]
    took = []
    for number in numbers[5 :: max(1, len(numbers) // count)][:count]:
        painted.forget()
        asked_s = time.perf_counter()
        shown.show_tap(number)
        done_s = painted.wait(
            lambda: (
                tap.page is not None
                and tap.page.number == number  # noqa: B023
                and tap.page.curves is not None
            )
        )
        took.append(done_s - asked_s)
    return took


def peak_mb() -> int:
    return round(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024)


def fits_mb(shown: Window) -> int:
    """Peak memory of the process that fits taps (Linux; 0 elsewhere)."""
    assert shown.replaying is not None and shown.replaying.fitter._process is not None
    status = Path(f"/proc/{shown.replaying.fitter._process.processId()}/status")
    if not status.exists():
        return 0
    lines = dict(line.split(":", 1) for line in status.read_text(encoding="ascii").splitlines())
    return round(int(lines["VmHWM"].split()[0]) / 1024)


def one_round(path: Path, folder: Path, way: str, began_s: float) -> dict[str, Any]:
    """In a process of its own: opened in a fresh window, jumped in, looked at taps, opened again."""
    if way != WAYS[2]:
        from rig.command.replay import opened

        opened(path).close()  # as the command does, to refuse before any window is there
    from rig.desk.entry import application, window

    application()
    shown = window(folder / "config", folder / "state")
    shown.sounds.on = False
    shown.show()
    before_mb = peak_mb()
    ready = QEventLoop()
    QTimer.singleShot(
        0 if way != WAYS[2] else 1000, ready.quit
    )  # somebody looks at the first page for a while
    ready.exec()
    first, painted = opening(shown, path)
    first["since_start_s"] = time.time() - began_s
    told: dict[str, Any] = {"opening": first, "before_mb": before_mb, "opened_mb": peak_mb()}
    QTest.qWait(1500)
    told["jumps"] = jumps(shown, painted, JUMPS)
    told["tap_pictures_s"] = tap_pictures(shown, painted, 10)
    told["fits_mb"] = fits_mb(shown)
    shown.leave_replay()
    QTest.qWait(100)
    told["again"] = opening(shown, path)[0]
    told["peak_mb"] = peak_mb()
    shown.close()
    return told


def forget_file(path: Path) -> None:
    """Take a file out of the system's cache, where the system knows how."""
    if hasattr(os, "posix_fadvise"):
        descriptor = os.open(path, os.O_RDONLY)
        try:
            os.fsync(descriptor)
            os.posix_fadvise(descriptor, 0, 0, os.POSIX_FADV_DONTNEED)
        finally:
            os.close(descriptor)


def spread(values: list[float], digits: int = 3) -> dict[str, float]:
    return {"median_s": round(statistics.median(values), digits), "worst_s": round(max(values), digits)}


def measure(path: Path, rounds: int) -> dict[str, Any]:
    from calibration import kernel_seconds

    told: dict[str, list[dict[str, Any]]] = {way: [] for way in WAYS}
    unit_s = [kernel_seconds()]
    with tempfile.TemporaryDirectory() as folder:
        for way in rounds * WAYS:
            if way == WAYS[1]:
                forget_file(path)
            words = ["--round", folder, "--session", str(path), "--way", way, "--began", repr(time.time())]
            done = subprocess.run([sys.executable, __file__, *words], capture_output=True, text=True)
            if done.returncode:
                raise SystemExit(done.stderr)
            told[way].append(json.loads(done.stdout.strip().split("\n")[-1]))
            unit_s.append(kernel_seconds())
    every = [one for ones in told.values() for one in ones]
    kinds = {name: [one for each in every for one in each["jumps"][name]] for name in every[0]["jumps"]}
    return {
        "unit_s": round(statistics.median(unit_s), 4),
        "opening": {way: spread([one["opening"]["painted_s"] for one in told[way]]) for way in WAYS},
        "opening_again": spread([one["again"]["painted_s"] for one in every]),
        "since_start_of_the_command": {
            way: spread([one["opening"]["since_start_s"] for one in told[way]]) for way in WAYS[:2]
        },
        "jumps": {
            "count": JUMPS * len(every),
            **spread([one for ones in kinds.values() for one in ones]),
            "by": {name: spread(ones) for name, ones in kinds.items()},
        },
        "tap_picture": {
            "first": spread([one["tap_pictures_s"][0] for one in every]),
            "others": spread([seconds for one in every for seconds in one["tap_pictures_s"][1:]]),
        },
        "window_mb": max(one["before_mb"] for one in every),
        "opened_mb": max(one["opened_mb"] for one in every),
        "peak_mb": max(one["peak_mb"] for one in every),
        "peak_mb_of_the_process_that_fits": max(one["fits_mb"] for one in every),
    }


def what_it_holds(path: Path) -> dict[str, Any]:
    from rig.session import open_session

    with open_session(path) as session:
        board = session.streams["board"]
        final = session.results["final"]
        return {
            "minutes": round(board.duration_s / 60.0, 1),
            "rows": len(board),
            "channels": len(board.channels),
            "session_mb": round(path.stat().st_size / 1e6),
            "events": len(session.events),
            "verdicts": len(session.results["live"]),
            "levels": len(final["levels"]),
            "taps": len(final["taps"]),
        }


def main() -> None:
    words = argparse.ArgumentParser()
    words.add_argument("--session", type=Path, help="one made before; else it is made in a temporary folder")
    words.add_argument("--rounds", type=int, default=ROUNDS)
    words.add_argument("--round", type=Path, help=argparse.SUPPRESS)
    words.add_argument("--way", choices=WAYS, help=argparse.SUPPRESS)
    words.add_argument("--began", type=float, default=0.0, help=argparse.SUPPRESS)
    words.add_argument("--write", action="store_true")
    parsed = words.parse_args()
    if parsed.round:
        print(json.dumps(one_round(parsed.session, parsed.round, parsed.way, parsed.began)))
        return
    with tempfile.TemporaryDirectory() as name:
        if parsed.session is None:
            from hour_session import build

            parsed.session = build(Path(name))
        load = round(os.getloadavg()[0], 2)
        told = {
            "load_before": load,
            "session": what_it_holds(parsed.session),
            **measure(parsed.session, parsed.rounds),
            "load_after": round(os.getloadavg()[0], 2),
        }
    print(json.dumps(told, indent=1))
    kept = (
        max(one["worst_s"] for one in told["opening"].values()) <= OPEN_S
        and told["jumps"]["worst_s"] <= JUMP_S
    )
    bars = f"{OPEN_S:g} s to open, {JUMP_S:g} s for each jump"
    print(f"within the bars ({bars})" if kept else f"NOT within the bars: {bars}")
    if parsed.write:
        Path(__file__).with_suffix(".json").write_text(json.dumps(told, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
