"""Things that go wrong at the stand-in on demand, by name: at the board, on its line, at the mechanism.

Written "NAME [NUMBER] [at SECONDS s]", for example "open_guard at 12 s" or "lose_frames 5".
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from drivers.standin.board_end import BoardEnd
from drivers.standin.places import Place

#: Of the simulated bench: see `drivers.simulated.faults`.
OF_THE_BENCH = (
    "open_guard",
    "close_guard",
    "press_stop",
    "release_stop",
    "fail_bridge",
    "mend_bridge",
    "sag_supply",
    "stall_crank",
    "break_link",
    "break_stops",
    "break_hinge",
    "short_motor",
    "mend",
)
OF_THE_BOARD = ("reset", "power_off", "power_on", "lose_frames", "damage_frames", "babble")
OF_THE_LINE = ("unplug", "plug_in")
NAMES = (*OF_THE_BOARD, *OF_THE_LINE, *OF_THE_BENCH)

PATTERN = re.compile(
    r"(?P<name>[a-z_]+)(?:\s+(?P<number>\d+(?:\.\d+)?))?(?:\s+at\s+(?P<at>\d+(?:\.\d+)?)\s*s)?\s*"
)


@dataclass(frozen=True)
class Mishap:
    """What is to happen, with which number, how many seconds after the stand-in began (None: now)."""

    name: str
    number: float | None = None
    at_s: float | None = None

    @classmethod
    def parse(cls, text: str) -> Mishap:
        """ValueError, in one sentence, for what is none."""
        match = PATTERN.fullmatch(text.strip())
        if match is None or match["name"] not in NAMES:
            raise ValueError(
                f"{text.strip()!r} is no fault; expected NAME [NUMBER] [at SECONDS s] with one of {', '.join(NAMES)}"
            )
        number, at = match["number"], match["at"]
        return cls(
            match["name"], None if number is None else float(number), None if at is None else float(at)
        )

    def happen(self, board: BoardEnd, bench_faults: object, place: Place) -> None:
        if self.name in OF_THE_LINE:
            getattr(place, self.name)()
        elif self.name in OF_THE_BOARD:
            given = () if self.number is None else (int(self.number),)
            getattr(board, self.name)(*given)
        else:
            fault = getattr(bench_faults, self.name)
            fault(self.number or 1.0) if self.name == "short_motor" else fault()
