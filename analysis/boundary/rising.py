"""Where the body is captured from its end stop, going up: a matter of basin and tap, told with a probability."""

from __future__ import annotations

import math
from collections.abc import Sequence

from analysis.boundary.records import BoundaryEstimate, LevelPoint


def rising_boundary(levels: Sequence[LevelPoint]) -> BoundaryEstimate:
    """Between the highest rising level that did not hold the body and the lowest above which all did.

    The value is the first level that held, the interval the bracket of the two levels, the std that of a uniform
    distribution over it (JCGM 100:2008, 4.3.7). It belongs to the taps and dwells of this run: capture is
    chance, and another tap would have another boundary. The reason gives the share of attempts that succeeded
    at the lowest level that captured, with its Clopper-Pearson 95 % limits.
    """
    from scipy.stats import binomtest

    rising = sorted(
        (level for level in levels if level.direction == "rising"), key=lambda level: level.flap_hz
    )
    if not rising:
        return BoundaryEstimate("not_located", "no rising level was reached")
    if len(rising) < 2:
        return BoundaryEstimate("not_located", "fewer than two rising levels")
    missed = [k for k, level in enumerate(rising) if not level.held]
    if not missed:
        return BoundaryEstimate("not_located", "the body was held at every rising level")
    if missed[-1] == len(rising) - 1:
        return BoundaryEstimate("not_located", "the body was not captured up to the highest rising level")
    below, above = rising[missed[-1]], rising[missed[-1] + 1]
    if above.began_held and below.began_held:
        return BoundaryEstimate("not_located", "the body was held already when the staircase began")
    tries = max(above.tried - above.returned, 1)
    chance = binomtest(1, tries).proportion_ci(0.95, method="exact")
    reason = (
        f"not held at {below.flap_hz:.2f} Hz, captured at {above.flap_hz:.2f} Hz "
        f"(1 of {tries} attempts there; 95 % limits of the chance {chance.low:.2f} to {chance.high:.2f})"
    )
    if above.began_held:
        reason = (
            f"not held at {below.flap_hz:.2f} Hz, captured without a tap on the way to {above.flap_hz:.2f} Hz"
        )
    early = [level for level in rising[: missed[-1]] if level.held]
    if early:
        reason += f"; held for a while at {early[0].flap_hz:.2f} Hz already"
    return BoundaryEstimate(
        "capture",
        reason,
        *_bracket(below.flap_hz, above.flap_hz),
        *_bracket(below.drive_v, above.drive_v),
        levels=len(rising),
        taps=sum(level.tried for level in rising),
    )


def _bracket(below: float, above: float) -> tuple[float, float, float, float]:
    return above, abs(above - below) / math.sqrt(12.0), min(below, above), max(below, above)
