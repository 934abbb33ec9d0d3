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


class HaltsAfter:
    """An operator who throws a tap out in one frame and halts in a later one."""

    def __init__(self, redo: int, halt: int) -> None:
        self._frame = 0
        self._does = {redo: "redo", halt: "halt"}

    def inputs(self) -> Sequence[OperatorInput]:
        self._frame += 1
        kind = self._does.get(self._frame)
        return [OperatorInput(kind)] if kind else []

    def prompt(self, text: str) -> None:
        pass


KINDS = ("lossy", "every-step", "halted")


def make(kind: str, path: Path) -> Path:
    """Run and seal one of KINDS."""
    rig = read_rig(find("boom"))
    assert rig.world is not None
    operator = None
    if kind == "lossy":
        rig = replace(rig, world=replace(rig.world, lost_frame_probability=0.002))
    elif kind == "halted":
        operator = HaltsAfter(700, 1400)  # in the second tap's observation, and on the next level
    protocol = read_protocol(find("every-step" if kind == "every-step" else "quick"), rig)
    run_session(rig, protocol, path, VirtualClock(), pace="fast", operator=operator)
    return path
