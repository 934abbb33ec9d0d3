"""How much a protocol asks for once its repeats are written out: a slip there would never end."""

from __future__ import annotations

from collections.abc import Sequence

from rig.steps import Hold, Observe, Prompt, Ramp, Release, Repeat, Staircase, Step, Tap, Zero

MOST_ACTIONS = 50_000
LONGEST_S = 7 * 24 * 3600.0


def extent(steps: Sequence[Step]) -> tuple[int, float]:
    """Number of actions, and time in s without ramps (holds and settling at their longest)."""
    actions, time_s = 0, 0.0
    for step in steps:
        more, longer = _extent(step)
        actions += more
        time_s += longer
    return actions, time_s


def excess(steps: Sequence[Step]) -> str:
    """What was expected if the steps ask for too much, else an empty text."""
    actions, time_s = extent(steps)
    if actions > MOST_ACTIONS:
        return f"at most {MOST_ACTIONS} actions when repeats and levels are written out, not {actions}"
    if time_s > LONGEST_S:
        return f"a protocol of at most {LONGEST_S / 86400.0:g} days, not {time_s / 86400.0:.1f}"
    return ""


def _extent(step: Step) -> tuple[int, float]:
    match step:
        case Repeat():
            actions, time_s = extent(step.steps)
            return step.times * actions, step.times * time_s
        case Staircase():
            taps = len(step.taps_n_m_s)
            dwell_s = step.settle_at_most_s + step.quiet_s + taps * step.tap_observe_s
            return len(step.levels_v) * (4 + taps), len(step.levels_v) * dwell_s
        case Hold():
            return 1, step.at_most_s if step.for_s is None else step.for_s
        case Tap() | Release():
            return 1, step.observe_s
        case Observe() | Zero():
            return 1, step.for_s
        case Prompt():
            return 1, step.at_most_s
        case Ramp():
            return 1, 0.0
    return 1, 0.0
