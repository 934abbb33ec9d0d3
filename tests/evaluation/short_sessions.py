"""Sessions of short simulated runs: with losses, with every kind of step, halted in the middle."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from drivers.clock import VirtualClock
from rig.command.sessions import run_session
from rig.files.protocol import read_protocol
from rig.files.rig import read_rig
from rig.run.inputs import OperatorInput
from rig.shipped import find


class Does:
    """An operator who does something in some frames."""

    def __init__(self, does: dict[int, OperatorInput]) -> None:
        self._frame = 0
        self._does = does

    def inputs(self) -> Sequence[OperatorInput]:
        self._frame += 1
        one = self._does.get(self._frame)
        return [one] if one else []

    def prompt(self, text: str) -> None:
        pass


KINDS = ("lossy", "every-step", "halted")
#: The first tap is given again, and that one thrown out. Why is told while the next tap is watched, while the tap
#: itself is, and once more when the level is over.
HALTED = {
    700: OperatorInput("redo"),
    720: OperatorInput("reason", "struck twice"),
    750: OperatorInput("reject"),
    760: OperatorInput("reason", "the cable was touched"),
    1200: OperatorInput("reason", "too hard", tap=0),
    1400: OperatorInput("halt"),  # on the next level
}


def make(kind: str, path: Path) -> Path:
    """Run and seal one of KINDS."""
    rig = read_rig(find("boom"))
    assert rig.world is not None
    operator = None
    if kind == "lossy":
        rig = replace(rig, world=replace(rig.world, lost_frame_probability=0.002))
    elif kind == "halted":
        operator = Does(HALTED)
    protocol = read_protocol(find("every-step" if kind == "every-step" else "quick"), rig)
    run_session(rig, protocol, path, VirtualClock(), pace="fast", operator=operator)
    return path
