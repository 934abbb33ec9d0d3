"""From levels and taps to what a session shows: boundaries, findings, theory, remarks."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from analysis import friction as friction_analysis
from analysis import passivity as passivity_analysis
from analysis import vibration as vibration_analysis
from analysis.averaged import cm_distance_m
from analysis.boundary.basin import CERTAIN, Basin
from analysis.boundary.falling import falling_boundary
from analysis.boundary.records import BoundaryEstimate, LevelPoint
from analysis.boundary.rising import rising_boundary
from rig.evaluation.evidence import Evidence, level_points, rig_constants
from rig.evaluation.theory import theory
from rig.results import Boundary, Finding, LevelResult, Measured, SessionResult

NORMAL_95 = 1.959964


def conclude(evidence: Evidence) -> SessionResult:
    """Everything that is told of a whole session."""
    points = level_points(evidence)
    falling = falling_boundary(points, rig_constants(evidence.rig))
    rising = rising_boundary(points)
    taps = sorted(
        (tap.result for visit in evidence.visits for tap in visit.taps), key=lambda tap: (tap.tick, tap.tap)
    )
    excluded: tuple[dict[str, Any], ...] = tuple(
        {"tap": tap.tap, "level": tap.level, "reason": tap.reason} for tap in taps if not tap.accepted
    )
    return SessionResult(
        levels=evidence.levels,
        taps=tuple(taps),
        falling=told_boundary(falling),
        rising=told_boundary(rising),
        vibration=_vibration(evidence, falling),
        passivity=_passivity(evidence),
        friction=_friction(evidence),
        theory=theory(evidence.rig),
        lost_rows=evidence.store.lost_rows,
        lost_frames=evidence.store.lost_frames,
        excluded=excluded,
        remarks=tuple(_remarks(evidence, falling, points)),
        fit_curve=fit_curve(falling, points),
    )


def fit_curve(falling: BoundaryEstimate, points: list[LevelPoint]) -> tuple[tuple[float, float, float], ...]:
    """The fitted form for the map: flap rate, stiffness, mean angle in deg, from the boundary up."""
    form = falling.form
    if form is None:
        return ()
    top = max(point.flap_hz for point in points)
    curve = []
    for flap in np.linspace(form.boundary_hz * 1.0001, top, 60):
        values = (float(flap), form.stiffness_per_s2(float(flap)), math.degrees(form.angle_rad(float(flap))))
        if all(math.isfinite(value) for value in values):
            curve.append(values)
    return tuple(curve)


def told_boundary(estimate: BoundaryEstimate) -> Boundary:
    def measured(value: float, std: float, low: float, high: float) -> Measured:
        numbers = [None if not math.isfinite(number) else number for number in (value, std, low, high)]
        return Measured(*numbers)

    if estimate.kind == "not_located":
        return Boundary("not_located", reason=estimate.reason)
    reason = "; ".join((estimate.reason, *estimate.flags))
    return Boundary(
        estimate.kind,
        measured(estimate.flap_hz, estimate.flap_std_hz, estimate.flap_low_hz, estimate.flap_high_hz),
        measured(estimate.drive_v, estimate.drive_std_v, estimate.drive_low_v, estimate.drive_high_v),
        reason,
    )


def _vibration(evidence: Evidence, falling: BoundaryEstimate) -> Finding:
    levels = [level for level in evidence.levels if _known(level)]
    points = [
        vibration_analysis.StiffnessPoint(
            level.flap_hz.value or 0.0, level.stiffness_per_s2.value or 0.0, level.stiffness_per_s2.std or 0.0
        )
        for level in levels
    ]
    shakes = [level.shake_amplitude_m.value for level in levels if level.shake_amplitude_m.value is not None]
    rig, mechanism = evidence.rig, evidence.rig.mechanism
    length = length_std = None
    if mechanism is not None and not {"body_mass_kg", "cm_height_m", "body_inertia_kg_m2"} & set(rig.unknown):
        length = mechanism.body_inertia_kg_m2 / (mechanism.body_mass_kg * cm_distance_m(mechanism))
        relative = [
            rig.constant_std.get(name, 0.0) / getattr(mechanism, name)
            for name in ("body_mass_kg", "cm_height_m", "body_inertia_kg_m2")
        ]
        length_std = length * math.hypot(*relative)
    shake = sum(shakes) / len(shakes) if shakes else None
    if shake is None and mechanism is not None and mechanism.shake_amplitude_m > 0.0:
        shake = mechanism.shake_amplitude_m
    verdict = vibration_analysis.judge(
        points,
        boundary_hz=falling.flap_hz if math.isfinite(falling.flap_hz) else None,
        shake_amplitude_m=shake,
        shake_std_m=(max(shakes) - min(shakes)) / math.sqrt(12.0) if len(shakes) > 1 else 0.0,
        length_m=length,
        length_std_m=length_std or 0.0,
    )
    numbers = {}
    for name, value, std in (
        ("slope", verdict.slope, verdict.slope_std),
        ("theory_slope", verdict.theory_slope, verdict.theory_slope_std),
    ):
        if math.isfinite(value):
            numbers[name] = Measured.normal(value, std)
    return Finding(verdict.verdict, verdict.reason, numbers)


def _known(level: LevelResult) -> bool:
    return (
        level.state == "held" and level.stiffness_per_s2.value is not None and level.flap_hz.value is not None
    )


def _passivity(evidence: Evidence) -> Finding:
    writes, gains = [], []
    for visit in evidence.visits:
        writes.extend(visit.visit.writes)
        for tap in visit.good:
            result = tap.result
            if tap.record is None or result.start_s is None or result.end_s is None:
                continue
            tick_hz, first = evidence.store.tick_hz, evidence.store.first_tick
            rows = evidence.store.rows(
                first + round(result.start_s * tick_hz), first + round(result.end_s * tick_hz) + 1
            )
            volts = evidence.store.values("motor voltage", rows)
            angle = evidence.store.values("body angle", rows)
            if volts is None or angle is None or evidence.store.gap_in(rows):
                continue
            gain = passivity_analysis.voltage_gain(evidence.store.time_s(rows), angle, volts)
            if gain is not None:
                gains.append(gain)
    if not writes and not any(visit.taps or visit.quiet is not None for visit in evidence.visits):
        return Finding("not_testable", "no level was reached, there are no intervals to look at")
    verdict = passivity_analysis.judge(writes, gains, locked=bool(writes))
    limit = verdict.smallest_gain_seen_v_per_rad
    numbers = {"smallest_gain_seen": Measured(limit)} if math.isfinite(limit) else {}
    return Finding(verdict.verdict, verdict.reason, numbers)


def _friction(evidence: Evidence) -> Finding:
    """Level by level, for the decay rate itself changes with the flap rate."""
    verdicts = []
    for pool in evidence.pools.values():
        taps = [tap for visit in pool for tap in visit.good]
        displaced = sum(tap.displaced for visit in pool for tap in visit.taps)
        if taps or displaced:
            fits = [tap.fit for tap in taps if tap.fit is not None]
            verdicts.append(friction_analysis.judge(fits, displaced=displaced))
    bad = [verdict for verdict in verdicts if verdict.verdict == "not_supported"]
    good = [verdict for verdict in verdicts if verdict.verdict == "supported"]
    if not verdicts or not (bad or good):
        reason = verdicts[0].reason if verdicts else "no tap was given to a held body"
        return Finding("not_testable", reason)
    if len(bad) > max(1, 0.2 * (len(bad) + len(good))):
        return Finding("not_supported", f"at {len(bad)} of {len(verdicts)} levels: {bad[0].reason}")
    reason = f"exponential decay, independent of tap size, at {len(good)} of {len(good) + len(bad)} levels"
    return Finding("supported", reason)


def _remarks(evidence: Evidence, falling: BoundaryEstimate, points: list[LevelPoint]) -> list[str]:
    remarks = []
    rig = evidence.rig
    if falling.form is not None:
        decays = [tap.decay_per_s for point in points for tap in point.taps]
        sigma = sorted(decays)[len(decays) // 2]
        basin = Basin(falling.form, sigma, rig.stops.low_rad, rig.stops.high_rad)
        remarks.extend(_basin_remarks(evidence, basin))
    verdicts = sum(level.regime != "undetermined" for level in evidence.levels)
    expected = f"{0.01 * verdicts:.1f}"
    if expected != "0.0":  # of fewer than five there is nothing to expect
        remarks.append(
            f"{verdicts} levels were given a definite regime at 99 %: {expected} of them may be expected wrong."
        )
    for trip in evidence.timeline.trips:
        remarks.append(f"The run was halted: {trip.data.get('sentence', trip.data.get('cause', ''))}")
    return remarks


def _basin_remarks(evidence: Evidence, basin: Basin) -> list[str]:
    """From where on taps of the sizes used, and of twice the largest, are survived."""
    mechanism = evidence.rig.mechanism
    if mechanism is None or "body_inertia_kg_m2" in evidence.rig.unknown:
        return []
    given = [
        abs(tap.result.impulse_n_m_s)
        for visit in evidence.visits
        for tap in visit.taps
        if tap.result.impulse_n_m_s
    ]
    if not given:
        return []
    sizes = sorted({*(float(f"{size:.2g}") for size in given), 2.0 * float(f"{max(given):.2g}")})
    towards = math.copysign(1.0, basin.form.fold_rad) if abs(basin.form.fold_rad) > 1e-6 else 1.0
    way = "upward" if towards > 0.0 else "downward"
    fc = basin.form.boundary_hz
    remarks = []
    for size in sizes[-3:]:
        kick = towards * size / mechanism.body_inertia_kg_m2
        expected, certain = basin.survived_from(kick), basin.survived_from(kick, CERTAIN)
        if math.isfinite(expected) and math.isfinite(certain):
            remarks.append(
                f"A tap of {1e3 * size:.3g} mN m s {way} is survived for certain from {certain:.2f} Hz, "
                f"{100.0 * (certain / fc - 1.0):.1f} % above the boundary (0.7 rule), and lost below {expected:.2f} Hz "
                "as a rule."
            )
    return remarks
