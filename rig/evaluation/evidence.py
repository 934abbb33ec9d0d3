"""Levels and taps as the estimators of the boundary want them."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from analysis.averaged import carriage_resonance_hz, coupling
from analysis.boundary.form import RigConstants
from analysis.boundary.records import LevelPoint, TapPoint
from analysis.decay.level import LevelDecay
from rig.description import RigDescription
from rig.evaluation.level import VisitAnalysis
from rig.evaluation.stream import RowStore
from rig.evaluation.timeline import Timeline
from rig.results import LevelResult

Key = tuple[str, float, str]


@dataclass(frozen=True)
class Evidence:
    """Everything a session gave, level by level; the three maps share their keys' order with `levels`."""

    rig: RigDescription
    store: RowStore
    timeline: Timeline
    levels: tuple[LevelResult, ...]
    pools: Mapping[Key, Sequence[VisitAnalysis]]
    fits: Mapping[Key, LevelDecay | None]

    @property
    def visits(self) -> tuple[VisitAnalysis, ...]:
        return tuple(visit for pool in self.pools.values() for visit in pool)


def rig_constants(rig: RigDescription) -> RigConstants:
    """mu and f0, as far as the rig file knows them."""
    needed = {
        "body_mass_kg",
        "cm_height_m",
        "body_inertia_kg_m2",
        "carriage_mass_kg",
        "carriage_stiffness_n_per_m",
        "shuttle_mass_kg",
    }
    if rig.mechanism is None or needed & set(rig.unknown):
        return RigConstants(0.0, 0.0, known=False)
    return RigConstants(coupling(rig.mechanism), carriage_resonance_hz(rig.mechanism))


def level_points(evidence: Evidence) -> list[LevelPoint]:
    """All levels whose flap rate is known, as points for the boundary."""
    points = []
    for level, (key, pool) in zip(evidence.levels, evidence.pools.items(), strict=True):
        if level.flap_hz.value is None or level.mean_angle_deg.value is None:
            continue
        fit = evidence.fits.get(key)
        quiet = next((visit.quiet for visit in pool if visit.quiet is not None), None)
        points.append(
            LevelPoint(
                direction=level.direction,
                flap_hz=level.flap_hz.value,
                drive_v=level.drive_v.value if level.drive_v.value is not None else math.nan,
                angle_rad=math.radians(level.mean_angle_deg.value),
                angle_std_rad=math.radians(level.mean_angle_deg.std or 0.0),
                ambient_rms_rad=fit.ambient_rms_rad if fit is not None else math.nan,
                quiet_s=quiet.span_s if quiet is not None else 1.0,
                held=level.state in ("held", "friction_held"),
                began_held=any(visit.start_state in ("held", "friction_held") for visit in pool),
                taps=tuple(_tap_points(pool)),
                tried=level.taps,
                returned=level.returned,
                lost_kick_rad_per_s=_lost_by(pool, level.state),
            )
        )
    return points


def _tap_points(pool: Sequence[VisitAnalysis]) -> list[TapPoint]:
    points = []
    for visit in pool:
        for tap in visit.good:
            fit, result = tap.fit, tap.result
            if (
                fit is None
                or fit.status != "ok"
                or fit.stiffness_per_s2 <= 0.0
                or result.kick_rad_per_s is None
            ):
                continue
            points.append(
                TapPoint(
                    fit.stiffness_per_s2,
                    fit.stiffness_std_per_s2,
                    fit.decay_per_s,
                    fit.decay_std_per_s,
                    fit.amplitude_rad,
                    abs(result.kick_rad_per_s),
                    (result.end_s or 0.0) - (result.start_s or 0.0),
                )
            )
    return points


def _lost_by(pool: Sequence[VisitAnalysis], state: str) -> float:
    """Kick of the tap that lost the body, 0 without a tap, NaN if it was not lost."""
    if state in ("held", "friction_held"):
        return math.nan
    for visit in pool:
        for tap in visit.taps:
            if tap.lost:
                return abs(tap.result.kick_rad_per_s or 0.0)
    began = any(visit.start_state in ("held", "friction_held") for visit in pool)
    return 0.0 if began else math.nan
