"""Exit codes of `haltere`, and the one error a command raises to end with one of them."""

from __future__ import annotations

from enum import IntEnum


class Exit(IntEnum):
    DONE = 0
    USAGE = 2  # bad usage or a bad file
    HALTED = 3  # by an interlock or the operator
    HARDWARE = 4  # link or hardware
    DAMAGED = 5  # damaged data


class CommandError(Exception):
    """Ends a command: one sentence for stderr, and the exit code."""

    def __init__(self, sentence: str, code: Exit = Exit.USAGE) -> None:
        super().__init__(sentence)
        self.code = code
