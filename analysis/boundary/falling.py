"""Where the held state ends: by divergence (stiffness to zero at a fold), by flutter, or not located and why."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from analysis.boundary.flutter import flutter_crossing
from analysis.boundary.fold import FEWEST_LEVELS, FoldFit, fit_fold
from analysis.boundary.form import RigConstants
from analysis.boundary.records import BoundaryEstimate, LevelPoint
from analysis.counting import counted

#: The fit reaches no further: a boundary this much below the lowest held level is not located.
FARTHEST = 0.15
#: Misfit beyond which no averaged form describes the levels.
WORST_BIRGE = 9.0
NORMAL_95 = 1.959964


def falling_boundary(levels: Sequence[LevelPoint], constants: RigConstants) -> BoundaryEstimate:
    """The boundary from above. Levels of both directions serve: a held body does not know how it came there.

    "divergence": the fold (or pitchfork) fitted to stiffness and mean angle; "flutter": decay through zero
    while stiffness stays; "not_located" with the reason in words. The voltage is that of the run itself (a local
    line through the lowest levels): the boundary in volts moves with the winding's temperature.
    """
    held = [level for level in levels if level.began_held and level.taps]
    if not levels:
        return BoundaryEstimate("not_located", "no level was reached")
    if not any(level.began_held for level in levels):
        return BoundaryEstimate("not_located", "the body was held at no level")
    flutter = flutter_crossing(held)
    fold = fit_fold(held, constants)
    if flutter is not None and (fold is None or flutter.low_hz > fold.low_hz):
        volts, volts_std = _volts(held, flutter.flap_hz, flutter.std_hz)
        return BoundaryEstimate(
            "flutter",
            "the decay rate reaches zero while the stiffness does not",
            flutter.flap_hz,
            flutter.std_hz,
            flutter.low_hz,
            flutter.high_hz,
            *_four(volts, volts_std),
            levels=len(held),
            taps=sum(len(level.taps) for level in held),
            used=tuple(held),
        )
    if fold is None:
        return _bracket(levels, held)
    estimate = _divergence(held, fold)
    refusal = _refusal(held, fold)
    if refusal:
        return replace(estimate, kind="not_located", reason=refusal)
    other = _lost_above(levels, fold)
    if other is not None:
        reason = (
            f"{estimate.reason}; but at {other.flap_hz:.2f} Hz, above it, the body was lost without a tap "
            "that could do it: by another cause"
        )
        estimate = replace(estimate, reason=reason, flags=(*estimate.flags, "lost above the boundary"))
    return estimate


def _divergence(held: Sequence[LevelPoint], fold: FoldFit) -> BoundaryEstimate:
    volts, volts_std = _volts(held, fold.flap_hz, fold.std_hz)
    kind = "fold" if abs(fold.form.fold_rad) > 0.05 else "pitchfork"
    reason = f"stiffness reaches zero ({kind}), fitted to stiffness and mean angle of {len(held)} held levels"
    flags = []
    if fold.birge[0] > 3.0:
        flags.append(f"stiffness scatters {math.sqrt(fold.birge[0]):.1f} times its uncertainty about the fit")
    if abs(fold.form.gain - 1.0) > 0.1:
        flags.append(f"the angle gain of the fit is {fold.form.gain:.2f}, not 1")
    return BoundaryEstimate(
        "divergence",
        reason,
        fold.flap_hz,
        fold.std_hz,
        fold.low_hz,
        fold.high_hz,
        *_four(volts, volts_std),
        form=fold.form,
        flags=tuple(flags),
        levels=len(held),
        taps=sum(len(level.taps) for level in held),
        used=tuple(held),
    )


def _refusal(held: Sequence[LevelPoint], fold: FoldFit) -> str:
    """Why a fitted boundary is not to be believed, or nothing."""
    lowest = min(level.flap_hz for level in held)
    if fold.open_below:
        return "the levels do not bound it from below"
    if lowest > (1.0 + FARTHEST) * fold.flap_hz:
        above = 100.0 * (lowest / fold.flap_hz - 1.0)
        return f"the lowest held level lies {above:.0f} % above the fitted {fold.flap_hz:.2f} Hz, too far to tell"
    if max(fold.birge) > WORST_BIRGE**2:
        return "stiffness and mean angle do not follow an averaged fold or pitchfork"
    return ""


def _lost_above(levels: Sequence[LevelPoint], fold: FoldFit) -> LevelPoint | None:
    """A level clearly above the boundary at which the body was lost without a tap."""
    for level in levels:
        lost = level.began_held and not level.held and level.lost_kick_rad_per_s == 0.0
        if lost and level.flap_hz > 1.01 * fold.high_hz:
            return level
    return None


def _bracket(levels: Sequence[LevelPoint], held: Sequence[LevelPoint]) -> BoundaryEstimate:
    """Too few levels for a fit: say what is known."""
    words = f"{counted(len(held), 'held level')} with usable taps, {FEWEST_LEVELS} are needed"
    falling = [level for level in levels if level.direction == "falling"]
    lost = [level.flap_hz for level in falling if not level.held]
    kept = [level.flap_hz for level in falling if level.held]
    if lost and kept and max(lost) < min(kept):
        words += f"; the body was last held at {min(kept):.2f} Hz and lost at {max(lost):.2f} Hz"
    return BoundaryEstimate("not_located", words)


def _volts(held: Sequence[LevelPoint], flap_hz: float, flap_std_hz: float) -> tuple[float, float]:
    """Drive at a flap rate, by a line through the lowest levels, falling ones first (nearest in temperature)."""
    falling = [level for level in held if level.direction == "falling"]
    near = sorted(falling if len(falling) >= 3 else held, key=lambda level: level.flap_hz)[:4]
    near = [level for level in near if math.isfinite(level.drive_v)]
    if len(near) < 2:
        return math.nan, math.nan
    flap = np.array([level.flap_hz for level in near])
    drive = np.array([level.drive_v for level in near])
    slope, offset = np.polyfit(flap - flap.mean(), drive, 1)
    left = drive - offset - slope * (flap - flap.mean())
    scatter = float(np.sqrt(left @ left / max(len(near) - 2, 1)))
    away = (flap_hz - flap.mean()) ** 2 / float(np.sum((flap - flap.mean()) ** 2))
    std = math.sqrt((slope * flap_std_hz) ** 2 + scatter**2 * (1.0 / len(near) + away))
    return float(offset + slope * (flap_hz - flap.mean())), std


def _four(value: float, std: float) -> tuple[float, float, float, float]:
    return value, std, value - NORMAL_95 * std, value + NORMAL_95 * std
