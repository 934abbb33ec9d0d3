"""A small journal for the tests: invented rows, events and results."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from drivers.rows import RowFrame
from rig.events import Event
from rig.record.journal import JournalWriter
from rig.shipped import find

CHANNELS: list[dict[str, Any]] = [
    {"name": "body", "measures": "body angle", "unit": "rad", "scale": 7.67e-4},
    {"name": "crank", "measures": "crank angle", "unit": "rad", "scale": 3.068e-3},
    {"name": "current", "measures": "motor current", "unit": "A", "scale": 6.1e-4},
    {"name": "voltage", "measures": "motor voltage", "unit": "V", "scale": 9.2e-4},
]
ROWS = 5


def header() -> dict[str, Any]:
    return {
        "tick_hz": 1_000_000,
        "row_period_ticks": 1000,
        "frame_rows": ROWS,
        "channels": CHANNELS,
        "rig_text": find("boom").read_text(encoding="utf-8"),
        "protocol_text": find("quick").read_text(encoding="utf-8"),
        "created_utc": "2026-01-01T00:00:00+00:00",
        "software": "haltere test",
    }


def frame(number: int, *, sequence: int | None = None) -> RowFrame:
    """Frame `number` of an endless stream that counts."""
    raw = np.arange(ROWS * 4, dtype=np.int32).reshape(ROWS, 4) + 1000 * number
    first = number * ROWS
    tick = 0xFFFFE000 + first * 1000  # wraps soon: unwrapping is part of what is tested
    return RowFrame(number if sequence is None else sequence, tick & 0xFFFFFFFF, 1000, first, 1, 0, raw)


def write(path: Path, frames: int = 6, *, ended: bool = True, **options: Any) -> JournalWriter:
    """A journal of `frames` frames with an event before each, closed."""
    writer = JournalWriter(path, header(), **options)
    for number in range(frames):
        writer.event(Event(number * 5000, "mark", {"text": f"frame {number}"}))
        writer.frame(frame(number))
    writer.result({"which": "final", "levels": []})
    writer.close(ended=ended)
    return writer
