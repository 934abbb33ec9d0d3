"""The first run of somebody new: the simulated boom, nothing to fill in, nothing powered."""

from __future__ import annotations

from pathlib import Path

from rig.bench.job import Job
from rig.desk.model.prepared import FIRST_PROTOCOL, FIRST_RIG, free_name, session_name
from rig.shipped import find


def simulated_job(folder: Path, utc_text: str, utc_s: float, software: str) -> Job:
    """The shipped boom with the shipped minute's look; its session goes to `folder`, under a name that is free."""
    rig, protocol = find(FIRST_RIG), find(FIRST_PROTOCOL)
    name = free_name(folder, session_name(FIRST_RIG, FIRST_PROTOCOL, utc_text))
    return Job(
        rig_text=rig.read_text(encoding="utf-8"),
        rig_name=rig.name,
        protocol_text=protocol.read_text(encoding="utf-8"),
        protocol_name=protocol.name,
        out=str((folder / name).absolute()),
        created_utc=utc_text,
        created_utc_s=utc_s,
        software=software,
        pictures=True,
        may_go_on=True,
    )
