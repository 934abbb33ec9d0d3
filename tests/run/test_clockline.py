"""The drift between two clocks comes out right although some frames arrive late."""

from __future__ import annotations

import numpy as np
import pytest

from rig.run.clockline import ClockPairs


def pairs(drift_ppm: float, seconds: float, seed: int = 3) -> ClockPairs:
    """Frames of 20 ms from a board whose clock runs fast by `drift_ppm`; every fifth second is a busy one."""
    random = np.random.default_rng(seed)
    clocks = ClockPairs(1_000_000)
    for frame in range(int(50 * seconds)):
        true_s = 0.02 * frame
        tick = 4_000_000_000 + round(1e6 * true_s * (1.0 + 1e-6 * drift_ppm))
        delay_s = random.exponential(2e-4) + (random.uniform(0.01, 0.08) if int(true_s) % 5 == 0 else 0.0)
        clocks.add(1000.0 + true_s + delay_s, tick)
    return clocks


@pytest.mark.parametrize("drift_ppm", [-120.0, 0.0, 35.0])
def test_the_drift_is_found_within_its_uncertainty(drift_ppm: float) -> None:
    line = pairs(drift_ppm, 120.0).line()
    assert line is not None
    assert abs(line.drift_ppm - drift_ppm) < max(4.0 * line.drift_std_ppm, 0.05)
    assert line.drift_std_ppm < 1.0
    assert 0.05 < line.longest_delay_s < 0.1


def test_a_long_run_stays_small() -> None:
    clocks = pairs(35.0, 4000.0)
    line = clocks.line()
    assert line is not None and abs(line.drift_ppm - 35.0) < 0.05
    assert line.span_s > 3900.0


def test_a_few_seconds_say_nothing() -> None:
    assert pairs(35.0, 5.0).line() is None
    assert ClockPairs(1_000_000).line() is None


def test_against_the_reference_estimator() -> None:
    """scipy.stats.theilslopes on the same promptest arrivals."""
    from scipy.stats import theilslopes

    clocks = pairs(-80.0, 60.0)
    line = clocks.line()
    board_s, delay_s = np.array([*clocks._points, clocks._best]).T
    assert line is not None
    assert line.drift_ppm == pytest.approx(-1e6 * theilslopes(delay_s, board_s).slope, abs=1e-6)
