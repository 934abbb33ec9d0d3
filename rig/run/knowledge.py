"""What the runner has been told of the body: its state, whether it has settled, how well its decay is known."""

from __future__ import annotations

import math
from collections.abc import Sequence

from rig.verdicts import Condition, LevelVerdict, TapVerdict, Verdict

#: States in which the body is held well enough to be tapped for its decay.
HELD = ("held", "friction_held")


class Knowledge:
    """Keeps the latest word of the analysis, and counts levels on which the body was not held."""

    def __init__(self) -> None:
        self.state = ""  # "" until the analysis has said something
        self.mean_rad = math.nan
        self.settled_tick = -1
        self.half_width_per_s: float | None = None
        self.answered = False  # a verdict on the level has come since `ask`
        self._was_held = False
        self._lost_in_row = 0

    @property
    def held(self) -> bool:
        return self.state in HELD

    def ask(self) -> None:
        """An interval has ended: what comes next may rest on its verdict."""
        self.answered = False

    def new_level(self) -> None:
        self.half_width_per_s = None

    def listen(self, verdicts: Sequence[Verdict]) -> None:
        for verdict in verdicts:
            if isinstance(verdict, Condition):
                self.state = verdict.state
                self.mean_rad = verdict.mean_angle_rad
                if verdict.settled:
                    self.settled_tick = verdict.tick
            elif isinstance(verdict, LevelVerdict):
                self.state = verdict.state or self.state
                self.half_width_per_s = verdict.decay_half_width_per_s
                self.answered = True
            elif isinstance(verdict, TapVerdict) and verdict.returned:
                self.state = "held"

    def enough_lost(self, direction: str, levels: int) -> bool:
        """Count a level that ends now: True when the body has not been held for so many in a row.

        Rising, levels before the first capture do not count: the body is not lost there, but not yet held.
        """
        if self.held:
            self._was_held = True
            self._lost_in_row = 0
        elif self._was_held or direction == "falling":
            self._lost_in_row += 1
        if self._lost_in_row < levels:
            return False
        self._lost_in_row = 0
        return True
