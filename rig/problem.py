"""A mistake in a file somebody wrote, told in one sentence."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


def printable(text: str) -> str:
    """Text as one line, with escapes for whatever would move a cursor or hide in a terminal."""
    return "".join(
        letter if letter.isprintable() else letter.encode("unicode_escape").decode() for letter in text
    )


@dataclass(frozen=True)
class Problem:
    """One mistake: where it is, what stands there, and what was expected.

    `line` is 1-based, 0 where the mistake is that something is missing from the whole file.
    """

    file: str
    line: int
    key: str
    value: str
    expected: str

    def __str__(self) -> str:
        place = f"{self.file}:{self.line}" if self.line else self.file
        key = f" {self.key}" if self.key else ""
        value = f" = {self.value}" if self.value and self.key else f" {self.value}" if self.value else ""
        what = f"{key}{value}:" if key or value else ""
        return printable(f"{place}:{what} expected {self.expected}")


class FileProblems(Exception):
    """All the mistakes found in the files of one command; shown together, exit code 2."""

    def __init__(self, problems: Sequence[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__("\n".join(str(problem) for problem in self.problems))
