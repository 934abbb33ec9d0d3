"""One row of the level table from all visits to one drive in one direction."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from analysis.decay.level import LevelDecay, fit_level
from analysis.flap import mean_flap
from analysis.load import cycle_mean_load
from analysis.position import mean_position
from analysis.regime import level_regime
from rig.description import RigDescription
from rig.evaluation.electrics import carriage_shake, winding_temperature
from rig.evaluation.stream import RowStore
from rig.evaluation.tap import TapAnalysis
from rig.evaluation.timeline import LevelVisit
from rig.evaluation.window import FEWEST_ROWS, Window, state_of, window
from rig.results import LevelResult, Measured

#: Time at the end of a visit from which the body's last state is told.
LAST_S = 1.0


@dataclass
class VisitAnalysis:
    """A visit with its taps analysed; filled tap by tap."""

    visit: LevelVisit
    taps: list[TapAnalysis] = field(default_factory=list)
    quiet: Window | None = None
    quiet_settled: bool = False
    start_state: str = ""
    start_reason: str = ""
    end_state: str = ""
    end_reason: str = ""

    @property
    def good(self) -> list[TapAnalysis]:
        return [tap for tap in self.taps if tap.result.accepted and tap.record is not None]


def look_at_quiet(analysis: VisitAnalysis, store: RowStore, rig: RigDescription) -> None:
    """State and quiet record before the first tap."""
    visit = analysis.visit
    if visit.quiet:
        start, end = visit.quiet[0]
    else:
        first_tap = visit.taps[0].tick if visit.taps else None
        end = first_tap or visit.end_tick or store.last_tick + 1
        start = max(visit.settled_tick or visit.start_tick, end - int(2.0 * store.tick_hz))
    part = window(store, start, end)
    if len(part) < FEWEST_ROWS:
        return
    analysis.quiet = part
    state = state_of(part, rig)
    if state is not None:
        analysis.start_state, analysis.start_reason = state.state, state.reason
        analysis.quiet_settled = state.state == "held" and (state.settled or visit.settled)


def look_at_end(analysis: VisitAnalysis, store: RowStore, rig: RigDescription) -> None:
    """State at the end of the visit."""
    end = analysis.visit.end_tick or store.last_tick + 1
    start = max(analysis.visit.start_tick, end - int(LAST_S * store.tick_hz))
    state = state_of(window(store, start, end), rig)
    if state is not None:
        analysis.end_state, analysis.end_reason = state.state, state.reason
    else:
        analysis.end_state, analysis.end_reason = analysis.start_state, analysis.start_reason


def visit_state(analysis: VisitAnalysis) -> tuple[str, str]:
    """State of a visit in one word: what it came to, and whether a held body was lost on the way."""
    # A visit under way has no end yet: it is what it began as.
    start = analysis.start_state or analysis.end_state
    end = analysis.end_state or start
    if start in ("held", "friction_held") and end not in ("held", "friction_held"):
        lost = next((tap for tap in analysis.taps if tap.lost), None)
        how = (
            f"after tap {lost.result.tap}: {lost.result.reason}"
            if lost
            else f"without a tap: {analysis.end_reason}"
        )
        return "lost", f"held at first, lost {how}"
    if start not in ("held", "friction_held") and end == "held":
        by = "by a tap" if any(tap.captured for tap in analysis.taps) else "without a tap"
        return "held", f"captured from the end stop {by}"
    if "bouncing" in (start, end) and end != "held":
        return "bouncing", analysis.end_reason if end == "bouncing" else analysis.start_reason
    return end, analysis.end_reason


def fit_visits(visits: Sequence[VisitAnalysis]) -> LevelDecay | None:
    """Joint decay fit of all usable taps of a level; None where there is none."""
    records = [tap.record for visit in visits for tap in visit.good if tap.record is not None]
    if not records:
        return None
    # A record that still drifts or rings from the step before would be taken for ambient motion.
    quiet = next((v.quiet for v in visits if v.quiet is not None and v.quiet_settled), None)
    return fit_level(records, None if quiet is None else quiet.record())


def level_result(
    visits: Sequence[VisitAnalysis],
    fit: LevelDecay | None,
    store: RowStore,
    rig: RigDescription,
    zero_load: tuple[float, float],
) -> LevelResult:
    """The row of the level table for visits to the same drive in the same direction."""
    first = visits[0].visit
    states = [visit_state(one) for one in visits]
    state, reason = states[-1]
    if any(one == "bouncing" for one, _ in states):
        state, reason = next(pair for pair in states if pair[0] == "bouncing")
    taps = [tap for one in visits for tap in one.taps]
    held = [one for one in visits if one.start_state in ("held", "friction_held")]
    regime = level_regime(
        fit,
        state=state,
        taps=len(taps),
        returned=sum(tap.result.returned for tap in taps),
        was_held=bool(held),
        displaced=sum(tap.displaced for tap in taps),
        state_reason=reason,
    )
    whole = [window(store, *_dwell(one.visit, store)) for one in visits]
    quiet = [one.quiet for one in visits if one.quiet is not None] or whole
    writes = [number for one in visits for number in one.visit.writes]
    told_reason = f"{reason}; {regime.reason}" if reason and reason not in regime.reason else regime.reason
    return LevelResult(
        direction=first.direction,
        drive_v=_drive(quiet, store, first.drive_v),
        flap_hz=_pooled([_flap(part) for part in whole]),
        mean_angle_deg=_pooled([_position(part) for part in quiet]),
        load_n=_pooled([_load(part, store, rig, zero_load) for part in quiet]),
        mode_hz=_mode(fit, "mode", "hz"),
        decay_per_s=_mode(fit, "decay", "per_s"),
        stiffness_per_s2=_mode(fit, "stiffness", "per_s2"),
        taps=len(taps),
        returned=sum(tap.result.returned for tap in taps),
        regime=regime.regime,
        state=state,
        reason=told_reason,
        shake_amplitude_m=_pooled([carriage_shake(part, store) for part in quiet]),
        winding_deg_c=winding_temperature(whole[-1], store, rig),
        writes=sum(writes) if writes else None,
        start_s=store.time_of(first.start_tick),
        role=first.role,
    )


def _dwell(visit: LevelVisit, store: RowStore) -> tuple[int, int]:
    """The part of a visit at constant drive."""
    end = visit.end_tick or store.last_tick + 1
    return visit.settled_tick or visit.start_tick, end


def _drive(parts: Sequence[Window], store: RowStore, register_v: float) -> Measured:
    measured = []
    for part in parts:
        volts = store.values("motor voltage", part.rows)
        if volts is not None and len(volts) >= FEWEST_ROWS:
            # Block means: converter noise and the ripple of the drive are correlated over a crank turn.
            blocks = [float(block.mean()) for block in np.array_split(volts, 10)]
            measured.append((float(volts.mean()), float(np.std(blocks, ddof=1) / math.sqrt(len(blocks)))))
    if not measured:
        return Measured(register_v)
    return _pooled([Measured.normal(*pair) for pair in measured])


def _flap(part: Window) -> Measured:
    if part.crank_rad is None or len(part) < FEWEST_ROWS:
        return Measured()
    rate = mean_flap(part.time_s, part.crank_rad)
    if rate.status == "standstill":
        return Measured(0.0)
    return Measured.normal(rate.value, rate.std) if math.isfinite(rate.std) else Measured(rate.value)


def _position(part: Window) -> Measured:
    if len(part) < FEWEST_ROWS:
        return Measured()
    mean = mean_position(part.time_s, part.angle_rad, part.crank_rad)
    value = math.degrees(mean.value)
    return Measured.normal(value, math.degrees(mean.std)) if math.isfinite(mean.std) else Measured(value)


def _load(part: Window, store: RowStore, rig: RigDescription, zero_load: tuple[float, float]) -> Measured:
    load = store.values("vertical load", part.rows)
    column = store.channels.measuring("vertical load")
    if load is None or column is None or part.crank_rad is None or len(part) < FEWEST_ROWS:
        return Measured()
    channel = store.channels[column]
    ends = sorted(float(channel.values(np.array([raw]))[0]) for raw in (channel.low_raw, channel.high_raw))
    mean = cycle_mean_load(
        part.time_s,
        load,
        part.crank_rad,
        range_n=(ends[0], ends[1]),
        zero_n=zero_load[0],
        zero_std_n=zero_load[1],
    )
    # A mean that does not stand out from its own uncertainty is "not resolvable", not a small number.
    return Measured.normal(mean.value, mean.std) if mean.resolved else Measured()


def _mode(fit: LevelDecay | None, name: str, unit: str) -> Measured:
    if fit is None or not math.isfinite(getattr(fit, f"{name}_{unit}")):
        return Measured()
    parts = (f"{name}_{unit}", f"{name}_std_{unit}", f"{name}_low_{unit}", f"{name}_high_{unit}")
    return Measured(*(float(getattr(fit, part)) for part in parts))


def _pooled(measured: Sequence[Measured]) -> Measured:
    """Weighted mean of repeated visits; the scatter between them widens it (Birge ratio)."""
    known = [one for one in measured if one.value is not None]
    if not known:
        return Measured()
    if len(known) == 1:
        return known[0]
    values = np.array([one.value for one in known], dtype=float)
    if any(one.std is None or one.std <= 0.0 for one in known):
        return Measured.normal(float(values.mean()), float(values.std(ddof=1) / math.sqrt(len(values))))
    weight = 1.0 / np.array([one.std for one in known], dtype=float) ** 2
    mean = float(weight @ values / weight.sum())
    birge = max(1.0, float(weight @ (values - mean) ** 2) / (len(values) - 1))
    return Measured.normal(mean, math.sqrt(birge / float(weight.sum())))
