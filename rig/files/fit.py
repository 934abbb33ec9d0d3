"""Does a protocol fit a rig: limits, tapper, releaser, sync line."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from rig.description import RigDescription
from rig.files.lines import Document, Path_
from rig.files.table import shown
from rig.files.voltage import HIGHEST_V
from rig.problem import Problem
from rig.steps import Hold, Ramp, Release, Repeat, Staircase, Step, Sync, Tap


def check_against(
    rig: RigDescription, steps: Sequence[Step], document: Document, problems: list[Problem]
) -> None:
    """Note every step that would cross a limit of the rig or needs what it has not."""
    for step in _all(steps):
        path = _path(document, step.line)
        for key, value, expected in _mistakes(rig, step):
            name = ".".join(str(part) for part in (*path, key))
            line = document.line((*path, key)) or step.line
            problems.append(Problem(document.name, line, name, shown(value), expected))


def _all(steps: Sequence[Step]) -> Iterator[Step]:
    for step in steps:
        if isinstance(step, Repeat):
            yield from _all(step.steps)
        else:
            yield step


def _path(document: Document, line: int) -> Path_:
    """Path of the [[step]] table that begins at a line."""

    def look(table: dict[str, object], path: Path_) -> Path_ | None:
        rows = table.get("step")
        if not isinstance(rows, list):
            return None
        for number, row in enumerate(rows):
            here = (*path, "step", number)
            if document.line(here) == line:
                return here
            found = look(row, here) if isinstance(row, dict) else None
            if found is not None:
                return found
        return None

    return look(document.data, ()) or ("step",)


def _mistakes(rig: RigDescription, step: Step) -> Iterator[tuple[str, object, str]]:
    limits = rig.limits
    if isinstance(step, Ramp):
        yield from _voltage(rig, "to", step.to_v)
        yield from _slew(rig, step.slew_v_per_s)
    if isinstance(step, Staircase):
        for level in step.levels_v:
            if level > limits.voltage_v:
                yield from _voltage(rig, "return_to" if _is_reference(step, level) else "levels", level)
                break
        yield from _slew(rig, step.slew_v_per_s)
    struck = (
        (isinstance(step, Tap) and step.by == "tapper")
        or (isinstance(step, Staircase) and bool(step.taps_n_m_s) and step.by == "tapper")
        or (isinstance(step, Hold) and step.until == "precise" and step.by == "tapper")
    )
    if struck and not rig.tapper:
        yield "by", "tapper", f'by = "hand": the rig {rig.name} has no tapper'
    if isinstance(step, Release):
        low, high = rig.stops.low_rad, rig.stops.high_rad
        if not rig.releaser:
            yield "do", "release", f"no release: the rig {rig.name} has no releaser"
        elif not low <= step.angle_rad <= high:
            between = f"{math.degrees(low):.4g} deg to {math.degrees(high):.4g} deg"
            yield (
                "angle",
                f"{math.degrees(step.angle_rad):.4g} deg",
                f"an angle between the end stops, {between}",
            )
    if isinstance(step, Sync) and not rig.sync_line:
        yield "do", "sync", f"no sync: the rig {rig.name} has no sync line"


def _is_reference(step: Staircase, level: float) -> bool:
    return any(
        role == "reference" and volts == level for role, volts in zip(step.roles, step.levels_v, strict=False)
    )


def _voltage(rig: RigDescription, key: str, volts: float) -> Iterator[tuple[str, object, str]]:
    if volts > HIGHEST_V:
        return  # told by the reader already
    if volts > rig.limits.voltage_v:
        yield key, f"{volts:g} V", f"at most the rig's limit of {rig.limits.voltage_v:g} V"


def _slew(rig: RigDescription, slew: float | None) -> Iterator[tuple[str, object, str]]:
    if slew is not None and slew > rig.limits.slew_v_per_s:
        yield "slew", f"{slew:g} V/s", f"at most the rig's limit of {rig.limits.slew_v_per_s:g} V/s"
