"""Where a run goes on after its drive was taken away: at the ramp that leads to the level that was broken off."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from rig.run import actions as ac

Course = tuple[ac.Action, ...]


def from_the_drive(course: Sequence[ac.Action], at: int, level: ac.BeginLevel | None) -> tuple[Course, int]:
    """The course to go on with and the place of its next action, from the place and level that were broken off.

    The level is given a new number: what comes is a new visit to the same drive, and the old one stays as it is.
    """
    made = tuple(course)
    at = min(at, len(made) - 1)
    if level is not None:
        number = 1 + max(one.level for one in made if isinstance(one, ac.BeginLevel))
        at = made.index(level)
        made = tuple(
            replace(one, level=number)
            if isinstance(one, ac.BeginLevel | ac.EndLevel) and one.level == level.level
            else one
            for one in made
        )
    ramps = [place for place in range(at + 1) if isinstance(made[place], ac.GoTo)]
    if not ramps or isinstance(made[at], ac.ReadZero):
        return made, at  # the drive was not needed yet, or is not needed for this
    return made, ramps[-1]
