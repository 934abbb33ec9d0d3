"""The header of a journal: everything needed to understand its rows without any other file."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from drivers.contract import Hello
from drivers.text_lines import TextSampler
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
        "samplers": _samplers(rig.samplers),
        "context": dict(rig.context),
        "pace": pace,
        "seed": rig.world.seed if rig.world is not None else None,
        "acknowledged_by": acknowledged_by,
    }


def _samplers(samplers: tuple[TextSampler, ...]) -> list[dict[str, Any]]:
    """What a journal's header says of a rig's samplers."""
    return [
        {
            "name": one.name,
            "limits": list(one.limits),
            "tick_hz": one.tick_hz,
            "columns": [asdict(column) for column in one.columns],
        }
        for one in samplers
    ]
