"""The header of a journal: everything needed to understand its rows without any other file."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from drivers.contract import Hello
from rig.description import RigDescription
from rig.steps import Protocol


def run_header(
    rig: RigDescription,
    protocol: Protocol,
    hello: Hello,
    *,
    created_utc: str,
    software: str,
    pace: str,
    acknowledged_by: str = "",
) -> dict[str, Any]:
    """What `rig.record.journal` writes first; plain JSON."""
    return {
        "created_utc": created_utc,
        "software": software,
        "tick_hz": hello.tick_hz,
        "row_period_ticks": hello.row_period_ticks,
        "frame_rows": hello.frame_rows,
        "channels": [asdict(channel) for channel in hello.channels],
        "bench": {"name": hello.name, "firmware": hello.firmware},
        "driver": rig.driver,
        "port": rig.port,
        "rig_text": rig.text,
        "protocol_text": protocol.text,
        "calibrations": {},
        "context": dict(rig.context),
        "pace": pace,
        "seed": rig.world.seed if rig.world is not None else None,
        "acknowledged_by": acknowledged_by,
    }
