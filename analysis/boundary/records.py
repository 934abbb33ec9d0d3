"""What the boundary is estimated from, and what an estimate says."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

from analysis.boundary.form import FittedForm

NAN = math.nan


@dataclass(frozen=True)
class TapPoint:
    """A returned tap with a usable decay fit."""

    stiffness_per_s2: float
    stiffness_std_per_s2: float
    decay_per_s: float
    decay_std_per_s: float
    amplitude_rad: float
    kick_rad_per_s: float
    window_s: float


@dataclass(frozen=True)
class LevelPoint:
    """One level: all visits to one drive in one direction.

    held: the body was held when it was last seen there; began_held: it was held before the first tap.
    lost_kick_rad_per_s: kick of the tap that lost it (0: lost without a tap; NaN: not lost).
    """

    direction: str
    flap_hz: float
    drive_v: float
    angle_rad: float
    angle_std_rad: float
    ambient_rms_rad: float
    quiet_s: float
    held: bool
    began_held: bool
    taps: tuple[TapPoint, ...] = ()
    tried: int = 0
    returned: int = 0
    lost_kick_rad_per_s: float = NAN


@dataclass(frozen=True)
class BoundaryEstimate:
    """A boundary with its 95 % interval; kind "divergence", "flutter", "capture" or "not_located"."""

    kind: str
    reason: str
    flap_hz: float = NAN
    flap_std_hz: float = NAN
    flap_low_hz: float = NAN
    flap_high_hz: float = NAN
    drive_v: float = NAN
    drive_std_v: float = NAN
    drive_low_v: float = NAN
    drive_high_v: float = NAN
    form: FittedForm | None = None
    flags: tuple[str, ...] = ()
    levels: int = 0
    taps: int = 0
    used: tuple[LevelPoint, ...] = field(default_factory=tuple)
