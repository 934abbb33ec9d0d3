"""Minutes of rows through the whole path: wire, driver, interlocks, journal, ring, analysis, session.

    .venv/bin/python tests/benchmarks/link_endurance.py [SECONDS AT 1 kHz] [SECONDS AT 10 kHz]

Prints, and keeps in link_endurance.json: rows lost, the longest gap between two readings with rows, the longest
time the line was not read, the share of a core the bench process took, and whether every sample is right.
"""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import tempfile
import time
from contextlib import ExitStack
from pathlib import Path

import numpy as np
from synthetic_bench import TICK_HZ, channel_table, samples

sys.path.insert(0, str(Path(__file__).parents[1] / "bench"))

from trials import Listener

from rig.bench.client import BenchClient
from rig.bench.job import Job
from rig.session import open_session

PROTOCOL = """haltere_protocol = 1
[protocol]
name = "hold"
title = "Hold"

[[step]]
do = "hold"
for = "{seconds:g} s"
"""


def rig_text(row_hz: float, frame_rows: int, channels: int) -> str:
    """A rig file for the synthetic bench."""
    tables = []
    for channel in channel_table(channels):
        scale = (
            "counts_per_turn = 1048576" if channel.unit == "rad" else f'per_count = "0.001 m{channel.unit}"'
        )
        if channel.measures == "temperature":
            continue  # the board sends more than the rig file describes
        tables.append(f'[channel.{channel.name}]\nmeasures = "{channel.measures}"\n{scale}\n')
    return f"""haltere_rig = 1
[rig]
name = "synthetic"
title = "Synthetic rows"
[bench]
driver = "board"
port = "none"
sample_rate = "{row_hz:g} Hz"
frame_rows = {frame_rows}
{"".join(tables)}
[limits]
current = "6 A"
voltage = "13 V"
winding_temperature = "110 degC"
travel_low = "-15 deg"
travel_high = "45 deg"
flap_rate = "60 Hz"
slew = "1 V/s"
disk_reserve = "10 MB"
[stops]
low = "-4 deg"
high = "30 deg"
"""


def cpu_s(pid: int) -> float:
    fields = Path(f"/proc/{pid}/stat").read_text(encoding="ascii").rsplit(")", 1)[1].split()
    return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")


def endure(row_hz: float, frame_rows: int, channels: int, where: str, seconds: float) -> dict[str, object]:
    here = Path(__file__).parent
    words = [f"{row_hz}", f"{frame_rows}", f"{channels}", where]
    with ExitStack() as stack:
        folder = stack.enter_context(tempfile.TemporaryDirectory())
        source = subprocess.Popen(
            [sys.executable, str(here / "synthetic_bench.py"), *words], stdout=subprocess.PIPE, text=True
        )
        assert source.stdout is not None
        stack.callback(source.kill)
        out = Path(folder) / "run.h5"
        job = Job(
            rig_text=rig_text(row_hz, frame_rows, channels),
            rig_name="synthetic.toml",
            protocol_text=PROTOCOL.format(seconds=seconds),
            protocol_name="hold.toml",
            out=str(out),
            port=source.stdout.readline().strip(),
            ring=str(Path(folder) / "ring"),
        )
        with BenchClient(job) as client:
            heard = Listener(client)
            heard.wait(lambda: heard.event("run"), what="the run")
            began_s, began_cpu_s = time.monotonic(), cpu_s(client.pid)
            heard.wait(lambda: heard.last("stopped"), at_most_s=seconds + 60.0, what="the end")
            share = (cpu_s(client.pid) - began_cpu_s) / (time.monotonic() - began_s)
            done = heard.wait(lambda: heard.last("done"), at_most_s=120.0, what="the session")
        source.send_signal(signal.SIGINT)
        counts = json.loads(source.communicate(timeout=30.0)[0].strip().split("\n")[-1])
        with open_session(out) as session:
            board = session.streams["board"]
            raw = np.column_stack([board.raw(channel.name) for channel in board.channels])
            right = bool(np.array_equal(raw, samples(board.tick.astype(np.int64), channels)))
            lost = sum(loss[1] for loss in session.losses)
            clock = next(event.data for event in session.events if event.kind == "clock")
            rows = len(board)
    return {
        "where": where,
        "row_hz": row_hz,
        "channels": channels,
        "frame_ms": 1e3 * frame_rows / row_hz,
        "rows": rows,
        "seconds": rows * round(TICK_HZ / row_hz) / TICK_HZ,
        "lost_rows": lost,
        "rows_dropped_by_the_writer": counts["rows_dropped"],
        "writer_paused_s": counts["paused_s"],
        "every_sample_right": right,
        "longest_gap_ms": round(1e3 * clock["longest_gap_s"], 1),
        "longest_not_reading_ms": round(1e3 * clock["longest_away_s"], 1),
        "core_share": round(share, 3),
        "exit_code": done["exit_code"],
    }


def main() -> None:
    slow_s, fast_s = (float(word) for word in (sys.argv[1:] + ["120", "60"][len(sys.argv) - 1 :]))
    results = []
    for row_hz, frame_rows, channels, where, seconds in (
        (1000.0, 10, 6, "pty", slow_s),
        (1000.0, 10, 6, "tcp", slow_s),
        (10_000.0, 20, 8, "pty", fast_s),
        (10_000.0, 20, 8, "tcp", fast_s),
    ):
        results.append(endure(row_hz, frame_rows, channels, where, seconds))
        print(json.dumps(results[-1]), flush=True)
    Path(__file__).with_suffix(".json").write_text(json.dumps(results, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
