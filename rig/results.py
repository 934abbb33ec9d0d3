"""The results of a session, and their JSON form (the face scripts rely on).

Numbers with uncertainty are {"value", "std", "low", "high"} with a 95 % interval; null where not known.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any

REGIMES = ("stable", "unstable", "undetermined")
STATES = ("held", "at_stop", "bouncing", "friction_held", "lost")


@dataclass(frozen=True)
class Measured:
    """A value with its standard uncertainty and 95 % interval; None where not known."""

    value: float | None = None
    std: float | None = None
    low: float | None = None
    high: float | None = None

    @classmethod
    def normal(cls, value: float, std: float, factor: float = 1.959964) -> Measured:
        """Symmetric interval value +- factor * std."""
        return cls(value, std, value - factor * std, value + factor * std)

    def to_json(self) -> dict[str, float | None]:
        return {name: _finite(getattr(self, name)) for name in ("value", "std", "low", "high")}


def _finite(number: float | None) -> float | None:
    # JSON has no NaN or infinity: what is not a number is not known.
    return None if number is None or not math.isfinite(number) else float(number)


@dataclass(frozen=True)
class TapResult:
    """One tap as analysed. Angles deg, kick = measured step of angular rate."""

    tap: int
    level: int
    tick: int
    impulse_n_m_s: float | None
    kick_rad_per_s: float | None
    returned: bool
    accepted: bool
    reason: str
    start_s: float | None = None  # fitted interval, seconds since the start of the session
    end_s: float | None = None
    decay_per_s: Measured = Measured()
    mode_hz: Measured = Measured()
    stiffness_per_s2: Measured = Measured()
    amplitude_deg: float | None = None
    status: str = ""

    def to_json(self) -> dict[str, Any]:
        fields = dict(vars(self))
        for name in ("decay_per_s", "mode_hz", "stiffness_per_s2"):
            fields[name] = getattr(self, name).to_json()
        return fields


@dataclass(frozen=True)
class LevelResult:
    """One row of the level table: all visits to one drive in one direction."""

    direction: str
    drive_v: Measured
    flap_hz: Measured
    mean_angle_deg: Measured
    load_n: Measured
    mode_hz: Measured
    decay_per_s: Measured
    stiffness_per_s2: Measured
    taps: int
    returned: int
    regime: str
    state: str
    reason: str
    shake_amplitude_m: Measured = Measured()
    winding_deg_c: float | None = None
    writes: int | None = None  # to the locked drive register
    start_s: float | None = None
    role: str = "level"

    def to_json(self) -> dict[str, Any]:
        fields: dict[str, Any] = {}
        for name in self.__dataclass_fields__:
            value = getattr(self, name)
            fields[name] = value.to_json() if isinstance(value, Measured) else value
        return fields


@dataclass(frozen=True)
class Boundary:
    """Where a held state ends (falling) or begins (rising)."""

    kind: str  # "divergence" | "flutter" | "capture" | "not_located"
    flap_hz: Measured = Measured()
    drive_v: Measured = Measured()
    reason: str = ""

    def to_json(self) -> dict[str, Any]:
        return {
            "flap_hz": self.flap_hz.to_json(),
            "drive_v": self.drive_v.to_json(),
            "kind": self.kind,
            "reason": self.reason,
        }


@dataclass(frozen=True)
class Finding:
    """A verdict with its reason and any numbers that belong to it."""

    verdict: str  # "supported" | "not_supported" | "not_testable"
    reason: str
    numbers: dict[str, Measured] = field(default_factory=dict)

    def to_json(self) -> dict[str, Any]:
        numbers = {name: number.to_json() for name, number in self.numbers.items()}
        return {"verdict": self.verdict, "reason": self.reason, **numbers}


@dataclass(frozen=True)
class Theory:
    """Predicted boundaries, Hz; None where a constant is unknown."""

    averaged_fold_hz: float | None = None
    floquet_hz: float | None = None
    mathieu_hz: float | None = None
    floquet_v: float | None = None
    reason: str = ""

    def to_json(self) -> dict[str, Any]:
        return {
            "averaged_fold_hz": _finite(self.averaged_fold_hz),
            "floquet_hz": _finite(self.floquet_hz),
            "mathieu_hz": _finite(self.mathieu_hz),
            "floquet_v": _finite(self.floquet_v),
            "reason": self.reason,
        }


@dataclass(frozen=True)
class SessionResult:
    """Everything `haltere analyse` tells."""

    levels: tuple[LevelResult, ...]
    taps: tuple[TapResult, ...]
    falling: Boundary
    rising: Boundary
    vibration: Finding
    passivity: Finding
    friction: Finding
    theory: Theory
    lost_rows: int = 0
    lost_frames: int = 0
    excluded: tuple[dict[str, Any], ...] = ()
    remarks: tuple[str, ...] = ()  # sentences for the report, e.g. "a larger tap is lost 4 % higher"
    # The form fitted for the boundary, for the map: (flap rate Hz, stiffness 1/s^2, mean angle deg).
    fit_curve: tuple[tuple[float, float, float], ...] = ()

    def to_json(self) -> dict[str, Any]:
        return {
            "levels": [level.to_json() for level in self.levels],
            "boundary": {"falling": self.falling.to_json(), "rising": self.rising.to_json()},
            "vibration": {"slope": Measured().to_json(), "theory_slope": Measured().to_json()}
            | self.vibration.to_json(),
            "passivity": {"smallest_gain_seen": Measured().to_json()} | self.passivity.to_json(),
            "friction": self.friction.to_json(),
            "theory": self.theory.to_json(),
            "losses": {"rows": self.lost_rows, "frames": self.lost_frames},
            "excluded": list(self.excluded),
            "taps": [tap.to_json() for tap in self.taps],
            "remarks": list(self.remarks),
        }
