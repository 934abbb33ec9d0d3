"""What a check comes to."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

OK, WRONG, NOT_CHECKED = "ok", "wrong", "not checked"
#: Problems of one check that are told in a line; JSON has them all.
TOLD = 4


@dataclass(frozen=True)
class Check:
    """One check: `outcome` is OK, WRONG or NOT_CHECKED, `sentence` what was found or why nothing was."""

    name: str
    outcome: str
    sentence: str
    problems: tuple[str, ...] = ()
    #: Whether it is a check that a sound session allows: left undone it says nothing good.
    due: bool = True

    def to_json(self) -> dict[str, Any]:
        return {
            "check": self.name,
            "outcome": self.outcome,
            "sentence": self.sentence,
            "problems": list(self.problems),
        }


def found(name: str, problems: Sequence[str], good: str) -> Check:
    """WRONG with all problems if there are any, else OK with the sentence `good`."""
    if not problems:
        return Check(name, OK, good)
    told = "; ".join(problems[:TOLD])
    if len(problems) > TOLD:
        told += f"; and {len(problems) - TOLD} more"
    return Check(name, WRONG, told, tuple(problems))


def skipped(name: str, why: str, *, due: bool = True) -> Check:
    """A check that was not done; not `due` if a sound session gives no occasion for it either."""
    return Check(name, NOT_CHECKED, why, due=due)


def counted(number: int, noun: str) -> str:
    """ "1 row", "2 rows"."""
    return f"{number} {noun}{'' if number == 1 else 's'}"
