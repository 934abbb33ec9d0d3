"""Spoilt bytes through the link's reader, more of them than a test has time for.

    python tests/benchmarks/link_fuzz.py [MEGABYTES] [--write]

The same as `tests/link/test_fuzz.py`, with other seeds: every trouble a line can make, alone and together. It ends
with an error at the first wrong row, untold loss or uncounted damage. `--write` keeps the counts beside this file.
"""

from __future__ import annotations

import json
import sys
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1] / "link"))

import bad_line

EACH = 25_000_000


def main() -> None:
    words = [word for word in sys.argv[1:] if not word.startswith("--")]
    total = round(1e6 * float(words[0])) if words else 200_000_000
    counts: dict[str, int] = {}
    begun = time.perf_counter()
    seeds = range(100, 100 + -(-total // EACH))
    for seed in seeds:
        for name, count in bad_line.fuzz(min(EACH, total), seed).items():
            counts[name] = counts.get(name, 0) + count
        print(f"seed {seed}: {counts}", flush=True)
    print(f"{counts['bytes'] / (time.perf_counter() - begun) / 1e6:.1f} MB/s; no wrong row, no untold loss")
    if "--write" in sys.argv:
        told = {"seeds": [seeds[0], seeds[-1]], "wrong_rows": 0, "counts": counts}
        place = Path(__file__).with_suffix(".json")
        place.write_text(json.dumps(told, indent=2) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
