"""Levels as visited, their taps, and trips, as a run model keeps them."""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass
class TapMark:
    """One tap on its level. `outcome`: observed, accepted, double, lost, left_out or excluded."""

    tap: int
    level: int
    tick: int
    by: str
    impulse_n_m_s: float | None
    outcome: str = "observed"
    reason: str = ""
    decay_per_s: float | None = None
    decay_std_per_s: float | None = None


@dataclass
class Rung:
    """One level as visited."""

    level: int
    direction: str
    drive_v: float
    role: str
    tick: int
    taps: list[TapMark] = field(default_factory=list)
    flap_hz: float | None = None
    state: str = ""
    regime: str = ""
    half_width_per_s: float | None = None
    settled: bool = False
    ended: bool = False


@dataclass
class Tripped:
    """One trip: when, what, and what must happen before arming again."""

    tick: int
    cause: str
    sentence: str
