"""What the window costs the bench process: microseconds per block of 20 rows of 8 channels put into the ring.

    python tests/benchmarks/ring_speed.py [FOLDER]

FOLDER is where the ring lies (/dev/shm unless told). At 500 blocks a second, 20 us a block are 1 % of a core.
"""

from __future__ import annotations

import statistics
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from calibration import kernel_seconds

from drivers.rows import RowBlock
from rig.bench.ring import RingReader, RingWriter

ROWS, CHANNELS, BLOCKS, BINS = 20, 8, 5000, 1 << 16


def blocks() -> list[RowBlock]:
    raw = np.random.default_rng(1).integers(-30_000, 30_000, (ROWS, CHANNELS)).astype(np.int32)
    first = np.arange(ROWS, dtype=np.uint64) * np.uint64(100)
    return [RowBlock(first + np.uint64(100 * ROWS * k), raw + np.int32(k), k, 1) for k in range(BLOCKS)]


def main() -> None:
    base = sys.argv[1] if len(sys.argv) > 1 else "/dev/shm"
    made = blocks()
    for rows_per_bin in (1, 5, 10, 50):
        with tempfile.TemporaryDirectory(dir=base) as folder:
            path = Path(folder) / "ring"
            writer = RingWriter(path, [f"c{k}" for k in range(CHANNELS)], 1_000_000, rows_per_bin, BINS)
            unit_us = 1e6 * kernel_seconds()
            took = []
            for block in made:
                start = time.perf_counter()
                writer.add(block)
                took.append(1e6 * (time.perf_counter() - start))
            reader = RingReader(path)
            start = time.perf_counter()
            found = len(reader.bins(2000))
            read_us = 1e6 * (time.perf_counter() - start)
            reader.close()
            writer.close()
        mean = statistics.fmean(took)
        print(
            f"bins of {rows_per_bin:2} rows: median {statistics.median(took):.1f} us, mean {mean:.1f} us, worst "
            f"{max(took):.0f} us a block; mean {mean / unit_us:.2e} calibration units; "
            f"reading {found} bins {read_us:.0f} us"
        )


if __name__ == "__main__":
    main()
