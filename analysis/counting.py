"""Numbers in sentences."""

from __future__ import annotations


def counted(number: int, noun: str) -> str:
    """ "1 held level", "2 held levels"; "no" is left to whoever knows what that means."""
    return f"{number} {noun}{'' if number == 1 else 's'}"
