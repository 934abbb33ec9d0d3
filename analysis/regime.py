"""Regime of a level: stable, unstable or undetermined, with the reason in words."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from analysis.decay.level import LevelDecay
from analysis.decay.result import DecayFit

NORMAL_99 = 2.575829


@dataclass(frozen=True)
class Regime:
    """stable, unstable or undetermined, and why."""

    regime: str
    reason: str


def decide(
    fit: DecayFit | LevelDecay,
    *,
    guard_per_s: float = 0.0,
    factor: float = NORMAL_99,
) -> Regime:
    """Regime from a decay fit: its 99 % interval must lie clear of zero by the guard band.

    A 95 % interval at the very boundary would be wrong one time in twenty by construction; guarded acceptance
    as in JCGM 106:2012, 8.3. Stable needs both decay and stiffness above zero; unstable needs either below.
    A fit that is not "ok" or "overdamped" decides nothing.
    """
    if fit.status not in ("ok", "overdamped"):
        return Regime("undetermined", fit.reason or fit.status.replace("_", " "))
    decay, decay_half = fit.decay_per_s, factor * fit.decay_std_per_s
    stiffness, stiffness_half = fit.stiffness_per_s2, factor * fit.stiffness_std_per_s2
    if not all(np.isfinite([decay, decay_half, stiffness, stiffness_half])):
        return Regime("undetermined", "the fit gives no interval")
    if stiffness + stiffness_half < 0.0:
        return Regime(
            "unstable", f"stiffness {stiffness:.2f} +- {stiffness_half:.2f} 1/s^2: the body diverges"
        )
    if decay + decay_half < -guard_per_s:
        return Regime("unstable", f"swings grow: decay rate {decay:.3f} +- {decay_half:.3f} 1/s (99 %)")
    doubts = tuple(getattr(fit, "remarks", ()))
    if "friction_like" in doubts:
        return Regime("undetermined", "the envelope is a straight line: dry friction may hold the body")
    if decay - decay_half > guard_per_s:
        if stiffness - stiffness_half > 0.0:
            return Regime("stable", f"swings decay: {decay:.3f} +- {decay_half:.3f} 1/s (99 %)")
        return Regime("undetermined", f"stiffness {stiffness:.2f} +- {stiffness_half:.2f} 1/s^2 may be zero")
    return Regime("undetermined", f"decay rate {decay:.3f} +- {decay_half:.3f} 1/s (99 %) may be zero")


def level_regime(
    fit: DecayFit | LevelDecay | None,
    *,
    state: str,
    taps: int = 0,
    returned: int = 0,
    was_held: bool = False,
    displaced: int = 0,
    state_reason: str = "",
    guard_per_s: float = 0.0,
) -> Regime:
    """Regime of a level from its decay fit, the state of the body and what became of the taps.

    state: as from `analysis.state.assess`. was_held: the body was held when the level began. displaced: taps
    after which it stayed where it was put. A level on which the body bounces or lies on a stop is never stable.
    """
    if state == "bouncing":
        return Regime("unstable", "the body is thrown against an end stop" + _because(state_reason))
    if state == "lost" or (state == "at_stop" and was_held):
        return Regime("unstable", "the held state ended at this level" + _because(state_reason))
    if state == "at_stop":
        return Regime("undetermined", "the body lies on an end stop; a held state was not seen here")
    if state == "friction_held" or displaced > 0:
        return Regime("undetermined", "friction holds the body where it is put" + _because(state_reason))
    if fit is None:
        if taps == 0:
            return Regime("undetermined", "held, but not tapped")
        if returned == 0:
            return Regime("unstable", f"none of {taps} taps was survived")
        return Regime("undetermined", f"{returned} of {taps} taps returned, without a usable decay fit")
    found = decide(fit, guard_per_s=guard_per_s)
    if found.regime == "stable" and taps > returned:
        return Regime(
            "stable", f"{found.reason}; {taps - returned} of {taps} taps were too large and lost it"
        )
    return found


def _because(reason: str) -> str:
    return f": {reason}" if reason else ""
