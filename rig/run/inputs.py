"""What the operator can do while a run is on."""

from __future__ import annotations

from dataclasses import dataclass

#: Longest reason that is taken: two lines in a report.
MOST_LETTERS = 200


@dataclass(frozen=True)
class OperatorInput:
    """What was pressed, or what its silence means; `reason` is recorded with what follows from it.

    halt         the run, as the rig file says for the operator
    stop         it with a ramp down
    acknowledge  a prompt
    redo         the last tap: leave it out and give it again
    reject       the last tap: leave it out
    reason       why a tap was left out: `tap` is its number, None for the last one left out
    next         level: enough is known of this one
    go_on        after a trip or a halt, at the level where it happened
    end          a run that waits to go on
    """

    kind: str
    reason: str = ""
    tap: int | None = None


def cleaned(text: str) -> str:
    """One line of printable letters: whatever else was in it, line ends too, is a space."""
    return " ".join("".join(letter if letter.isprintable() else " " for letter in text).split())
