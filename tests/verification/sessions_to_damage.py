"""A tiny session of invented rows, and a short one of a simulated run, both sound."""

from __future__ import annotations

from dataclasses import asdict, replace
from pathlib import Path

import numpy as np

from drivers.clock import VirtualClock
from drivers.rows import RowFrame
from rig.bench_source import bench_for
from rig.command.sessions import run_session
from rig.events import Event
from rig.files.protocol import read_protocol
from rig.files.rig import read_rig
from rig.record.journal import JournalWriter
from rig.record.sealing import seal
from rig.shipped import find
from rig.verdicts import Condition, verdict_to_json

ONE_LEVEL = """haltere_protocol = 1

[protocol]
name = "one-level"
title = "One level with two taps, as short as it goes"

[[step]]
do = "staircase"
order = "rising"
levels = ["9 V"]
slew = "1 V/s"
taps = ["0.1 mN m s", "-0.1 mN m s"]
settle = "2 s"
settle_at_most = "2 s"
quiet = "1 s"
tap_observe = "2 s"
"""


def tiny(folder: Path) -> Path:
    """Twelve frames of invented numbers, the fifth lost, with the texts of a real rig; told by another version."""
    rig = read_rig(find("boom"))
    hello = bench_for(rig, VirtualClock()).open()
    header = {
        "created_utc": "2026-01-01T00:00:00+00:00",
        "software": "haltere of old",
        "tick_hz": 1_000_000,
        "row_period_ticks": 1000,
        "frame_rows": 5,
        "channels": [asdict(channel) for channel in hello.channels],
        "rig_text": rig.text,
        "protocol_text": find("quick").read_text(encoding="utf-8"),
        "calibrations": {"load": "by hand"},
    }
    random = np.random.default_rng(4)
    writer = JournalWriter(folder / "tiny.journal", header)
    for number in range(12):
        raw = random.integers(-5000, 5000, (5, len(hello.channels))).astype(np.int32)
        tick = 7000 + 5000 * number
        writer.event(Event(tick, "mark", {"text": f"frame {number}"}))
        if number != 4:
            writer.frame(RowFrame(number, tick, 1000, 5 * number, 1, 0, raw))
        told = verdict_to_json(Condition(tick, 25.0, 0.1 * number, "held", True))
        writer.result({"which": "live", **told})
    writer.result({"which": "final", "levels": []})
    writer.close()
    seal(folder / "tiny.journal", folder / "tiny.h5")
    return folder / "tiny.h5"


def short(folder: Path) -> Path:
    """A run of one level on the simulated boom that loses a frame now and then."""
    (folder / "one-level.toml").write_text(ONE_LEVEL, encoding="utf-8")
    rig = read_rig(find("boom"))
    assert rig.world is not None
    rig = replace(rig, world=replace(rig.world, lost_frame_probability=0.002, seed=1))
    protocol = read_protocol(folder / "one-level.toml", rig)
    run_session(rig, protocol, folder / "short.h5", VirtualClock(), pace="fast")
    return folder / "short.h5"
