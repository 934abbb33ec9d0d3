"""What a frame costs the loop that journals it: microseconds per `JournalWriter.frame`, 20 rows of 8 channels.

    python tests/benchmarks/journal_speed.py [FOLDER]

Paced as a bench would (500 frames a second), on the disk of FOLDER (the temporary folder unless told), and as fast
as it goes. The worst one matters more than the mean: the loop that calls it feeds the heartbeat.
"""

from __future__ import annotations

import gc
import statistics
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from calibration import kernel_seconds

from drivers.rows import RowFrame
from rig.record.journal import JournalWriter

FRAMES = 5000


def measure(folder: Path, pause_s: float) -> list[float]:
    """Seconds each of FRAMES calls took."""
    raw = np.arange(160, dtype=np.int32).reshape(20, 8)
    frames = [RowFrame(k, 20_000 * k & 0xFFFFFFFF, 1000, 20 * k, 1, 0, raw) for k in range(FRAMES)]
    path = folder / "speed.journal"
    writer = JournalWriter(path, {"channels": []})
    took = []
    for frame in frames:
        start = time.perf_counter()
        writer.frame(frame)
        took.append(time.perf_counter() - start)
        if pause_s:
            time.sleep(pause_s)
    writer.close()
    path.unlink()
    return took


def main() -> None:
    base = Path(sys.argv[1]) if len(sys.argv) > 1 else None
    gc.disable()
    with tempfile.TemporaryDirectory(dir=base) as folder:
        for name, pause_s in (("500 a second", 0.002), ("as fast as it goes", 0.0)):
            unit_us = 1e6 * kernel_seconds()
            took = sorted(1e6 * one for one in measure(Path(folder), pause_s))
            mean, median = statistics.fmean(took), statistics.median(took)
            print(
                f"{name}: median {median:.1f} us, mean {mean:.1f} us, 99.9 % {took[-FRAMES // 1000]:.0f} us, "
                f"worst {took[-1]:.0f} us; mean {mean / unit_us:.2e} calibration units"
            )


if __name__ == "__main__":
    main()
