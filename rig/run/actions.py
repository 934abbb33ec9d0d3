"""A protocol as a flat list of actions, each one thing to begin and to wait for.

`rig.run.course` makes the list, `rig.run.runner` walks through it.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any


@dataclass(frozen=True, kw_only=True)
class Action:
    """Base. Actions of one staircase share its number, so that the rest of it can be skipped."""

    staircase: int = -1


@dataclass(frozen=True, kw_only=True)
class GoTo(Action):
    """Ramp the drive and wait until it is there."""

    to_v: float
    slew_v_per_s: float


@dataclass(frozen=True, kw_only=True)
class BeginLevel(Action):
    level: int
    direction: str
    drive_v: float
    role: str
    stop_after_lost: int = 0


@dataclass(frozen=True, kw_only=True)
class EndLevel(Action):
    level: int


@dataclass(frozen=True, kw_only=True)
class Wait(Action):
    for_s: float


@dataclass(frozen=True, kw_only=True)
class Settle(Action):
    """Wait until crank and body have settled: `least_s` at least, `most_s` at most."""

    least_s: float
    most_s: float


@dataclass(frozen=True, kw_only=True)
class Watch(Action):
    """A record without a tap, drive locked; `kind` is "quiet" or "observe"."""

    for_s: float
    kind: str


@dataclass(frozen=True, kw_only=True)
class Strike(Action):
    """A tap and its observation, drive locked. `planned`: part of a staircase's plan, which may be skipped
    where it could teach nothing (see `rig.run.runner`)."""

    impulse_n_m_s: float
    observe_s: float
    by: str
    planned: bool = False


@dataclass(frozen=True, kw_only=True)
class StrikeUntilPrecise(Action):
    """Taps of alternating sign until the level's decay rate is known well enough, or time is up."""

    impulse_n_m_s: float
    observe_s: float
    by: str
    precision_per_s: float
    most_s: float


@dataclass(frozen=True, kw_only=True)
class LetGo(Action):
    angle_rad: float
    observe_s: float


@dataclass(frozen=True, kw_only=True)
class ReadZero(Action):
    """Mean of body angle and load with the drive off."""

    for_s: float


@dataclass(frozen=True, kw_only=True)
class Ask(Action):
    text: str
    most_s: float


@dataclass(frozen=True, kw_only=True)
class Note(Action):
    """An event at once."""

    kind: str
    data: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, kw_only=True)
class Pulse(Action):
    """One pulse on the sync line."""
