"""Whether results and verdicts are the same as others, and where they first differ.

Numbers are the same if they agree within RELATIVE of the larger one or within ABSOLUTE: the same arithmetic on
another processor differs in the last digits, a changed row or constant in the first ones. All else must be equal.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Iterator, Sequence
from typing import Any

from rig.verdicts import verdict_from_json

RELATIVE = 1e-9
ABSOLUTE = 1e-12
WITHIN = f"{RELATIVE:.0e}".replace("e-0", "e-")


def differences(stored: Any, now: Any, path: str = "") -> Iterator[str]:
    """Each difference of two JSON values: "levels[3].decay_per_s.value: 0.871 stored, 0.880 now"."""
    if isinstance(stored, dict) and isinstance(now, dict):
        for name in [*stored, *(name for name in now if name not in stored)]:
            place = f"{path}.{name}" if path else str(name)
            if name not in now:
                yield f"{place}: {_brief(stored[name])} stored, nothing now"
            elif name not in stored:
                yield f"{place}: nothing stored, {_brief(now[name])} now"
            else:
                yield from differences(stored[name], now[name], place)
    elif isinstance(stored, list) and isinstance(now, list):
        if len(stored) != len(now):
            yield f"{path or 'the list'}: {len(stored)} entries stored, {len(now)} now"
        for index, (one, other) in enumerate(zip(stored, now, strict=False)):
            yield from differences(one, other, f"{path}[{index}]")
    elif not _same(stored, now):
        yield f"{path or 'all of it'}: {_brief(stored)} stored, {_brief(now)} now"


def first_difference(stored: Any, now: Any) -> str:
    """The first difference, "" if there is none."""
    return next(differences(stored, now), "")


def told_verdicts(live: Sequence[Any]) -> list[dict[str, Any]] | None:
    """The stored live results if these are verdicts; None for none, and for what older versions stored."""
    try:
        for told in live:
            verdict_from_json(told)
    except (ValueError, AttributeError):
        return None
    return list(live) or None


def verdict_difference(
    stored: Sequence[dict[str, Any]], now: Sequence[dict[str, Any]], *, complete: bool = True
) -> str:
    """The first difference of verdicts in order of tick and kind, "" if there is none.

    A run that was cut off (not `complete`) may have told more than was written: verdicts are then compared up to
    the tick of the last one stored.
    """
    ours, theirs = _in_order(stored), _in_order(now)
    if not complete and ours:
        last = ours[-1]["tick"]
        ours = [one for one in ours if one["tick"] < last]
        theirs = [one for one in theirs if one["tick"] < last]
    for index, (one, other) in enumerate(zip(ours, theirs, strict=False)):
        if told := first_difference(one, other):
            return f"verdict {index} ({one['kind']} at tick {one['tick']}): {told}"
    if len(ours) != len(theirs):
        return f"{len(ours)} verdicts stored, {len(theirs)} now"
    return ""


def _in_order(verdicts: Iterable[dict[str, Any]]) -> list[dict[str, Any]]:
    return sorted(
        verdicts, key=lambda one: (one["tick"], one["kind"], one.get("level", -1), one.get("tap", -1))
    )


def _same(one: Any, other: Any) -> bool:
    numbers = [isinstance(value, int | float) and not isinstance(value, bool) for value in (one, other)]
    if all(numbers):
        return one == other or math.isclose(one, other, rel_tol=RELATIVE, abs_tol=ABSOLUTE)
    return type(one) is type(other) and bool(one == other)


def _brief(value: Any) -> str:
    """Enough of a value for a sentence."""
    text = value if isinstance(value, str) else json.dumps(value)
    return text if len(text) <= 60 else f"{text[:57]}..."
