"""An hour of 8 channels at 10 kHz: how long sealing takes and how much memory, how soon any window is drawn.

    python tests/benchmarks/overview_speed.py [--minutes M] [--write]

A journal of frames of 20 rows (1.2 GB) is written to a temporary folder and sealed in a process of its own, whose
peak memory is told. Then the session is opened and windows of every length are asked for at 2000 bins each; a
handful of losses lie in it. Times are told in seconds and, since these depend on the machine and its mood, in
calibration units (`calibration.py`, interleaved). `--write` keeps the result beside this file.
"""

from __future__ import annotations

import argparse
import json
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from calibration import kernel_seconds

from drivers.rows import RowFrame
from rig.record.journal import JournalWriter
from rig.record.sealing import seal
from rig.session import open_session

SAMPLE_HZ, CHANNELS, FRAME_ROWS, BINS = 10_000, 8, 20, 2000
PERIOD = 1_000_000 // SAMPLE_HZ
REPEATS = 7
WINDOWS_S = (3600.0, 1800.0, 600.0, 60.0, 10.0, 1.0, 0.1)


def write_journal(path: Path, minutes: float) -> int:
    """Frames of slow swings with noise, as a bench sends them; returns how many were written."""
    channels = [
        {"name": f"channel{k}", "measures": "body angle" if k == 0 else "other", "unit": "rad", "scale": 1e-3}
        for k in range(CHANNELS)
    ]
    header = {
        "tick_hz": 1_000_000,
        "row_period_ticks": PERIOD,
        "frame_rows": FRAME_ROWS,
        "channels": channels,
    }
    writer = JournalWriter(path, header)
    random = np.random.default_rng(1)
    frames, at_once = round(minutes * 60 * SAMPLE_HZ / FRAME_ROWS), 5000
    for start in range(0, frames, at_once):
        time_s = (start * FRAME_ROWS + np.arange(at_once * FRAME_ROWS)) / SAMPLE_HZ
        swing = 8000 * np.sin(2 * np.pi * np.outer(time_s, np.linspace(0.3, 30, CHANNELS)))
        raw = (
            (swing + random.normal(0, 20, swing.shape))
            .astype(np.int32)
            .reshape(at_once, FRAME_ROWS, CHANNELS)
        )
        for k in range(min(at_once, frames - start)):
            number = start + k
            if number % 400_000 != 399_999:  # lost on the way
                first = number * FRAME_ROWS
                writer.frame(RowFrame(number, first * PERIOD & 0xFFFFFFFF, PERIOD, first, 1, 0, raw[k]))
    writer.close()
    return frames


def measured(act: Callable[[], Any], repeats: int = 1) -> dict[str, float]:
    """Median seconds and calibration units of an act; the worst as well if it is repeated."""
    seconds, units = [], []
    for _ in range(repeats):
        before = kernel_seconds()
        start = time.perf_counter()
        act()
        seconds.append(time.perf_counter() - start)
        units.append(seconds[-1] / (0.5 * (before + kernel_seconds())))
    told = {"seconds": round(statistics.median(seconds), 4), "units": round(statistics.median(units), 2)}
    return told | {"worst_seconds": round(max(seconds), 4)} if repeats > 1 else told


def seal_here(folder: Path) -> None:
    """In a process of its own: what sealing takes, and the peak of memory."""
    before_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    told = measured(lambda: seal(folder / "hour.journal", folder / "hour.h5", keep_journal=True))
    peak_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(json.dumps({**told, "peak_mb": round(peak_mb), "of_it_before_mb": round(before_mb)}))


def draw(path: Path, window_s: float, random: np.random.Generator) -> tuple[float, float]:
    """Seconds until a window somewhere is there for one channel, and for all; nothing kept from one before."""
    with open_session(path) as session:
        board = session.streams["board"]
        start = int(1e6 * random.uniform(0.0, max(len(board) / SAMPLE_HZ - window_s, 0.0)))
        end = start + int(1e6 * window_s)
        names = [channel.name for channel in board.channels]
        begun = time.perf_counter()
        board.overview(names[0], start, end, BINS)
        first = time.perf_counter()
        for name in names[1:]:
            board.overview(name, start, end, BINS)
        return first - begun, time.perf_counter() - begun


def look(path: Path) -> dict[str, Any]:
    """Opening, and windows of every length at places of their own each time."""
    result: dict[str, Any] = {"open": measured(lambda: open_session(path).close(), REPEATS)}
    random = np.random.default_rng(5)
    for window_s in WINDOWS_S:
        unit = kernel_seconds()
        one, all_of_them = zip(*(draw(path, window_s, random) for _ in range(REPEATS)), strict=True)
        unit = 0.5 * (unit + kernel_seconds())
        result[f"window of {window_s:g} s"] = {
            "first_channel_seconds": round(statistics.median(one), 4),
            "worst_seconds": round(max(one), 4),
            "units": round(statistics.median(one) / unit, 3),
            "all_channels_seconds": round(statistics.median(all_of_them), 4),
        }
    return result


def main() -> None:
    words = argparse.ArgumentParser()
    words.add_argument("--minutes", type=float, default=60.0)
    words.add_argument("--write", action="store_true")
    words.add_argument("--seal-here", type=Path)
    parsed = words.parse_args()
    if parsed.seal_here:
        seal_here(parsed.seal_here)
        return
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        frames = write_journal(folder / "hour.journal", parsed.minutes)
        journal_mb = (folder / "hour.journal").stat().st_size / 1e6
        done = subprocess.run(
            [sys.executable, __file__, "--seal-here", name], capture_output=True, text=True, check=True
        )
        result = {"seal": json.loads(done.stdout), **look(folder / "hour.h5")}
        session_mb = (folder / "hour.h5").stat().st_size / 1e6
    print(
        f"{parsed.minutes:g} min, {frames} frames: journal {journal_mb:.0f} MB, session {session_mb:.0f} MB"
    )
    for what, told in result.items():
        print(f"{what:20} " + ", ".join(f"{key.replace('_', ' ')} {value}" for key, value in told.items()))
    if parsed.write:
        made = {"minutes": parsed.minutes, "journal_mb": round(journal_mb), "session_mb": round(session_mb)}
        place = Path(__file__).with_suffix(".json")
        place.write_text(json.dumps({**made, "results": result}, indent=2) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
