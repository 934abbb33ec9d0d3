"""The files people write: rig files and protocol files, with every mistake told at its line."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rig.description import RigDescription
    from rig.steps import Protocol


def read_pair(rig_path: str | Path, protocol_path: str | Path) -> tuple[RigDescription, Protocol]:
    """A rig file and a protocol for it. FileProblems with the mistakes of both files at once."""
    from rig.files.protocol import read_protocol
    from rig.files.rig import read_rig
    from rig.problem import FileProblems, Problem

    problems: list[Problem] = []
    rig = protocol = None
    try:
        rig = read_rig(rig_path)
    except FileProblems as error:
        problems.extend(error.problems)
    try:
        protocol = read_protocol(protocol_path, rig)
    except FileProblems as error:
        problems.extend(error.problems)
    if problems or rig is None or protocol is None:
        raise FileProblems(problems)
    return rig, protocol
