"""Hundreds of interruptions at random moments: how many of each kept the motor safe and the rows whole.

.venv/bin/python tests/benchmarks/interruptions.py [HARD KILLS OF EACH] [OTHERS OF EACH] [SEED]
"""

from __future__ import annotations

import json
import os
import random
import sys
import tempfile
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1] / "bench"))

from interruptions import INTERRUPTIONS, interrupt
from trials import stand_in

WORKERS = 2
LONGEST_S = 3.0


def series(name: str, count: int, seed: int, folder: Path) -> dict[str, object]:
    """`count` interruptions of one kind on a stand-in of its own."""
    random_of = random.Random(f"{name} {seed}")
    off_s, failures, starved = [], [], 0
    with stand_in(folder) as served:
        for number in range(count):
            place = folder / f"{number}"
            place.mkdir()
            try:
                one_s, held_up = interrupt(name, served, place, random_of.uniform(0.0, LONGEST_S))
                off_s.append(one_s)
                starved += held_up
            except Exception as error:
                failures.append(f"{number}: {error}")
                time.sleep(3.0)
    return {
        "count": count,
        "failed": len(failures),
        "failures": failures[:5],
        "tried_again_on_a_busy_machine": starved,
        "longest_from_last_heartbeat_to_off_s": round(max(off_s, default=float("nan")), 3),
    }


def main() -> None:
    hard, soft, seed = (int(word) for word in (sys.argv[1:] + ["100", "10", "1"][len(sys.argv) - 1 :]))
    results: dict[str, dict[str, object]] = {}
    began = time.monotonic()
    with tempfile.TemporaryDirectory() as folder:
        os.environ["XDG_STATE_HOME"] = folder
        _all(Path(folder), hard, soft, seed, results)
    told = {"seed": seed, "minutes": round((time.monotonic() - began) / 60.0, 1), "interruptions": results}
    Path(__file__).with_suffix(".json").write_text(json.dumps(told, indent=1) + "\n", encoding="utf-8")


def _all(folder: Path, hard: int, soft: int, seed: int, results: dict[str, dict[str, object]]) -> None:
    with ThreadPoolExecutor(WORKERS) as pool:
        jobs = {
            name: pool.submit(
                series, name, hard if name.startswith("kill") else soft, seed, folder / str(index)
            )
            for index, name in enumerate(INTERRUPTIONS)
        }
        for name, job in jobs.items():
            results[name] = job.result()
            print(f"{name:25s} {json.dumps(results[name])}", flush=True)


if __name__ == "__main__":
    main()
