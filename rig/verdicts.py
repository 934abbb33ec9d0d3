"""What the analysis tells the runner while a run is on."""

from __future__ import annotations

from dataclasses import dataclass


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
