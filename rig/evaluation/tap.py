"""One tap: when it struck, how hard, whether the body came back, and how its swing decayed."""

from __future__ import annotations

import math
from dataclasses import dataclass

from analysis.decay.fit import fit_decay
from analysis.decay.record import TapRecord
from analysis.decay.result import DecayFit
from analysis.position import mean_position
from analysis.state import after_tap
from analysis.taps import kick_from_fit, refine_tap
from rig.description import RigDescription
from rig.evaluation.stream import RowStore
from rig.evaluation.timeline import TapVisit
from rig.evaluation.window import Window, resolution, state_of, window
from rig.results import Measured, TapResult

#: Record looked at before the tap, for its rest position.
BEFORE_S = 1.0
#: From the middle of the pulse to the first fitted sample: longer than half the longest pulse.
CLEAR_S = 0.035
#: A step of angular rate below this many of its standard uncertainties was not a tap.
SEEN_STD = 4.0
#: A second hit leaves a residual at the start of the fit of at least this share of the swing; the nonlinearity
#: of a single swing leaves a few per cent.
DISTURBED = 0.12


@dataclass(frozen=True)
class TapAnalysis:
    """A tap as told, and what the level needs of it."""

    result: TapResult
    fit: DecayFit | None = None
    record: TapRecord | None = None
    displaced: bool = False
    captured: bool = False  # from an end stop into the held state
    lost: bool = False
    was_held: bool = False
    before_rms_rad: float = math.nan


def analyse_tap(store: RowStore, visit: TapVisit, rig: RigDescription) -> TapAnalysis:
    """Analyse one tap from the rows up to the end of its observation.

    A tap on a body that lies on an end stop is an attempt at capture: it counts as a tap and never as a
    return, for nothing was there to return to.
    """
    before_ticks = int(BEFORE_S * store.tick_hz)
    end_tick = visit.end_tick if visit.end_tick is not None else store.last_tick + 1
    before = window(store, visit.tick - before_ticks, visit.tick)
    whole = window(store, visit.tick - before_ticks, end_tick)
    tap_s = store.time_of(visit.tick)
    state_before = state_of(before, rig)
    was_held = state_before is not None and state_before.state in ("held", "friction_held")
    after = whole.after(tap_s)
    if state_before is None or len(after) < 100:
        reason = _taken_back(visit) or "the record around the tap is too short"
        return _told(store, visit, False, False, reason)
    if not was_held:
        last = state_of(after.after(after.time_s[-1] - 1.0), rig)
        captured = last is not None and last.state == "held"
        words = "captured by the tap" if captured else "not captured by the tap"
        reason = f"{state_before.reason} before the tap; {words}"
        if visit.excluded:
            reason = f"{_taken_back(visit)}; {reason}"
        return TapAnalysis(_result(store, visit, False, False, reason), captured=captured)
    return _held_tap(store, visit, rig, before, whole, tap_s)


def _held_tap(
    store: RowStore, visit: TapVisit, rig: RigDescription, before: Window, whole: Window, tap_s: float
) -> TapAnalysis:
    rest = mean_position(before.time_s, before.angle_rad, before.crank_rad)
    rest_std = rest.std if math.isfinite(rest.std) else 0.0
    kick = None
    onset_s = tap_s
    if visit.by != "release":
        # A hand is slower and less punctual than a tapper that the board fires.
        search = (-0.01, 0.06) if visit.by == "tapper" else (-0.2, 1.5)
        try:
            kick = refine_tap(whole.time_s, whole.angle_rad, whole.crank_rad, tap_s, search_s=search)
        except ValueError:
            kick = None
        if kick is not None and kick.status == "ok":
            onset_s = kick.onset_s
    after = whole.after(onset_s)
    came = after_tap(
        after.time_s,
        after.angle_rad,
        after.crank_rad,
        rest_rad=rest.value,
        stops_rad=(rig.stops.low_rad, rig.stops.high_rad),
        rest_std_rad=max(rest_std, 0.5 * resolution(rig)),
        resolution_rad=resolution(rig),
    )
    fitted = whole.after(onset_s + CLEAR_S)
    fit = fit_decay(
        fitted.time_s,
        fitted.angle_rad,
        fitted.crank_rad,
        stops_rad=(rig.stops.low_rad, rig.stops.high_rad),
    )
    seen = visit.by == "release" or (
        kick is not None
        and kick.status == "ok"
        and abs(kick.kick_rad_per_s) > SEEN_STD * kick.kick_std_rad_per_s
    )
    reason, accepted = _verdict(visit, fit, came.reason, came.returned, seen, kick.hits if kick else 1)
    speed = math.nan
    if fit.status == "ok":
        speed = kick_from_fit(fit, float(fitted.time_s[0]) - onset_s)
    if not math.isfinite(speed) and kick is not None:
        speed = kick.kick_rad_per_s
    rms = float((before.angle_rad - before.angle_rad.mean()).std()) if len(before) else math.nan
    result = _result(store, visit, came.returned, accepted, reason, fit, fitted, speed)
    return TapAnalysis(
        result,
        fit,
        fitted.record(),
        displaced=came.outcome == "displaced",
        lost=came.outcome == "lost",
        was_held=True,
        before_rms_rad=rms,
    )


def _taken_back(visit: TapVisit) -> str:
    """The operator's word comes first, whatever the record shows; "" if there is none."""
    return f"excluded by the operator: {visit.excluded}" if visit.excluded else ""


def _verdict(
    visit: TapVisit, fit: DecayFit, came: str, returned: bool, seen: bool, hits: int
) -> tuple[str, bool]:
    """Why a tap counts for the decay, or why not."""
    if visit.excluded:
        return _taken_back(visit), False
    if not returned:
        return came, False
    if not seen:
        return "no tap was seen at its time", False
    if hits > 1 and _disturbed(fit):
        return f"struck {hits} times", False
    if fit.status not in ("ok", "overdamped"):
        return fit.reason or fit.status.replace("_", " "), False
    return came, True


def _disturbed(fit: DecayFit) -> bool:
    """Whether the start of the record fits badly: a second hit, and not just the bend of a fast swing, which
    the onset detector cannot tell from one."""
    early = fit.residual_rad[: max(len(fit.residual_rad) // 8, 20)]
    return not math.isfinite(fit.amplitude_rad) or float(early.std()) > DISTURBED * fit.amplitude_rad


def _told(store: RowStore, visit: TapVisit, returned: bool, accepted: bool, reason: str) -> TapAnalysis:
    return TapAnalysis(_result(store, visit, returned, accepted, reason))


def _result(
    store: RowStore,
    visit: TapVisit,
    returned: bool,
    accepted: bool,
    reason: str,
    fit: DecayFit | None = None,
    fitted: Window | None = None,
    speed: float = math.nan,
) -> TapResult:
    known = fit is not None and math.isfinite(fit.decay_per_s)
    return TapResult(
        tap=visit.tap,
        level=visit.level,
        tick=visit.tick,
        impulse_n_m_s=visit.impulse_n_m_s,
        kick_rad_per_s=speed if math.isfinite(speed) else None,
        returned=returned,
        accepted=accepted,
        reason=reason,
        start_s=float(fitted.time_s[0]) if fitted is not None and len(fitted) else None,
        end_s=float(fitted.time_s[-1]) if fitted is not None and len(fitted) else None,
        decay_per_s=decay_of(fit) if known and fit else Measured(),
        mode_hz=mode_of(fit) if known and fit else Measured(),
        stiffness_per_s2=stiffness_of(fit) if known and fit else Measured(),
        amplitude_deg=math.degrees(fit.amplitude_rad) if known and fit else None,
        status=fit.status if fit is not None else "",
    )


def decay_of(fit: DecayFit) -> Measured:
    return Measured(fit.decay_per_s, fit.decay_std_per_s, fit.decay_low_per_s, fit.decay_high_per_s)


def mode_of(fit: DecayFit) -> Measured:
    return Measured(fit.mode_hz, fit.mode_std_hz, fit.mode_low_hz, fit.mode_high_hz)


def stiffness_of(fit: DecayFit) -> Measured:
    return Measured(
        fit.stiffness_per_s2,
        fit.stiffness_std_per_s2,
        fit.stiffness_low_per_s2,
        fit.stiffness_high_per_s2,
    )
