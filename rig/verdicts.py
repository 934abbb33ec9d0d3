"""What the analysis tells the runner while a run is on, and its JSON form in journals and sessions.

JSON: {"kind": "condition" | "tap" | "level", ...the fields}; a number that is none is null.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from typing import Any


@dataclass(frozen=True)
class Verdict:
    """Base; `tick` is the last row the verdict rests on."""

    tick: int


@dataclass(frozen=True)
class Condition(Verdict):
    """The state of crank and body, at least twice a second.

    `state` is one of held, at_stop, bouncing, friction_held, lost; `settled` is true when flap rate and
    mean position no longer drift beyond their noise and no ringing is left above the ambient level.
    """

    flap_hz: float
    mean_angle_rad: float
    state: str
    settled: bool


@dataclass(frozen=True)
class TapVerdict(Verdict):
    """After a tap's observation: did the body return, and how fast."""

    tap: int
    level: int
    returned: bool
    accepted: bool
    reason: str
    decay_per_s: float | None = None
    decay_std_per_s: float | None = None


@dataclass(frozen=True)
class LevelVerdict(Verdict):
    """What is known of a level so far, after each of its taps and at its end."""

    level: int
    state: str
    regime: str
    decay_half_width_per_s: float | None


KINDS: dict[str, type[Verdict]] = {"condition": Condition, "tap": TapVerdict, "level": LevelVerdict}


def verdict_to_json(verdict: Verdict) -> dict[str, Any]:
    """The JSON form, of plain Python values."""
    (kind,) = (kind for kind, made in KINDS.items() if type(verdict) is made)
    told: dict[str, Any] = {"kind": kind}
    for field in fields(verdict):
        value = getattr(verdict, field.name)
        if value is not None and "float" in str(field.type):
            value = float(value) if math.isfinite(value) else None
        elif field.type in ("int", "bool"):
            value = bool(value) if field.type == "bool" else int(value)  # not numpy's
        told[field.name] = value
    return told


def verdict_from_json(told: dict[str, Any]) -> Verdict:
    """Inverse of `verdict_to_json`; ValueError, with a reason, for anything else."""
    made = KINDS.get(str(told.get("kind")))
    if made is None:
        raise ValueError(f"{told.get('kind')!r} is no kind of verdict")
    values: dict[str, Any] = {}
    for field in fields(made):
        if field.name not in told:
            raise ValueError(f"a {told['kind']} verdict without {field.name}")
        value = told[field.name]
        if value is None and field.type == "float":
            value = math.nan
        elif not _fits(value, str(field.type)):
            raise ValueError(f"a {told['kind']} verdict with {value!r} as {field.name}")
        values[field.name] = float(value) if value is not None and "float" in str(field.type) else value
    return made(**values)


def _fits(value: Any, kind: str) -> bool:
    if value is None:
        return kind.endswith("None")
    if kind == "str":
        return isinstance(value, str)
    if kind == "bool" or isinstance(value, bool):
        return kind == "bool" and isinstance(value, bool)
    return isinstance(value, int) or ("float" in kind and isinstance(value, float))
