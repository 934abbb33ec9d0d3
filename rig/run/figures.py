"""A value beside its limit, told with as many digits as it takes to tell them apart."""

from __future__ import annotations

MOST_DIGITS = 9


def apart(value: float, limit: float, digits: int) -> tuple[str, str]:
    """Both with `digits` decimals, or with more where they would read the same without being it."""
    while True:
        told = f"{value:.{digits}f}", f"{limit:.{digits}f}"
        if told[0] != told[1] or value == limit or digits >= MOST_DIGITS:
            return told
        digits += 1
