"""How much faster than real time a simulated bench runs, with sensors, in 10 ms frames, on one core.

    python tests/benchmarks/simulation_speed.py [--write]

Every mechanism runs held at 10 V with its random torque, one heartbeat a read. Told as multiples of real time and,
since that depends on the machine and its mood, as calibration units per second of bench time (`calibration.py`,
interleaved). `--write` keeps the result beside this file.
"""

from __future__ import annotations

import json
import statistics
import sys
import time
from dataclasses import replace
from pathlib import Path

from calibration import kernel_seconds

from drivers.clock import VirtualClock
from rig.bench_source import bench_for
from rig.files.rig import read_rig
from rig.shipped import find

FRAME_S = 0.01
REPEATS = 7
BENCH_S = 10.0


def times_real(name: str, frame_s: float = FRAME_S) -> tuple[float, float]:
    """Multiples of real time (median of repeats) and calibration units per second of bench time."""
    rig = read_rig(find(name))
    rig = replace(rig, frame_rows=round(frame_s * rig.sample_hz))
    bench = bench_for(rig, VirtualClock())
    bench.open()
    bench.heartbeat()
    bench.enable()
    bench.drive(10.0, 5.0)
    for _ in range(round(6.0 / frame_s)):
        bench.read(frame_s)
        bench.heartbeat()
    multiples, units = [], []
    for _ in range(REPEATS):
        before = kernel_seconds()
        start = time.perf_counter()
        for _ in range(round(BENCH_S / frame_s)):
            bench.read(frame_s)
            bench.heartbeat()
        took = time.perf_counter() - start
        unit = 0.5 * (before + kernel_seconds())
        multiples.append(BENCH_S / took)
        units.append(took / BENCH_S / unit)
    bench.close()
    return statistics.median(multiples), statistics.median(units)


def main() -> None:
    result = {}
    for name in ("boom", "boom-geared", "boom-clamped", "column"):
        for frame_s in (0.01, 0.02):
            multiple, units = times_real(name, frame_s)
            result[f"{name}, frames of {1e3 * frame_s:.0f} ms"] = {
                "times_real": round(multiple),
                "calibration_units_per_bench_s": round(units, 4),
            }
            print(
                f"{name:14} frames of {1e3 * frame_s:2.0f} ms: {multiple:4.0f} x real time, {units:.4f} units a second"
            )
    if "--write" in sys.argv:
        place = Path(__file__).with_suffix(".json")
        place.write_text(json.dumps({"seed": 1, "results": result}, indent=2) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
