"""Flap rate, mean position, load, taps, state of the body, planning: each against something it does not use."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.optimize import curve_fit
from synthetic_decay import DEG

from analysis.flap import mean_flap, turn_rate
from analysis.friction import judge
from analysis.load import cycle_mean_load
from analysis.planning import decay_std, decay_std_slow, dwell_s, taps_for
from analysis.position import mean_position
from analysis.sinefit import fit_sine
from analysis.state import after_tap, assess
from analysis.taps import find_taps, refine_tap

STOPS = (-4.0 * DEG, 30.0 * DEG)
COUNT = 2.0 * np.pi / 2048


def crank(time: np.ndarray, hertz: float) -> np.ndarray:
    return np.floor(2.0 * np.pi * hertz * time / COUNT) * COUNT


def test_mean_flap_is_turns_over_time() -> None:
    """By hand: 25.3 Hz for 4 s; wrapped or not; an end-to-end mean even when the speed wanders."""
    t = np.arange(0.0, 4.0, 1e-3)
    for phase in (crank(t, 25.3), np.mod(crank(t, 25.3), 2.0 * np.pi), -crank(t, 25.3)):
        assert mean_flap(t, phase).value == pytest.approx(25.3, abs=2e-3)
    swept = 2.0 * np.pi * (20.0 * t + 0.5 * t**2)  # 20 to 24 Hz: mean 22
    found = mean_flap(t, swept)
    assert found.value == pytest.approx(22.0, abs=0.05)
    assert found.std > 0.1
    assert mean_flap(t, np.zeros_like(t)).status == "standstill"
    middle, rate = turn_rate(t, swept)
    np.testing.assert_allclose(rate, 20.0 + middle, atol=0.1)
    with pytest.raises(ValueError):
        mean_flap(t, swept[:-1])


def test_sine_fit_against_curve_fit() -> None:
    """IEEE Std 1057 four-parameter fit: the same minimum as scipy's curve_fit started at the truth."""
    t = np.arange(0.0, 1.0, 1e-3)
    rng = np.random.default_rng(3)
    y = 0.7 * np.sin(2 * np.pi * 17.31 * t + 0.4) + 0.2 + 0.1 * rng.standard_normal(len(t))
    found = fit_sine(t, y)

    def wave(x, f, a, b, c):  # type: ignore[no-untyped-def]
        return a * np.cos(2 * np.pi * f * x) + b * np.sin(2 * np.pi * f * x) + c

    reference, _ = curve_fit(wave, t, y, p0=[17.3, 0.3, 0.6, 0.2])
    assert found.frequency_hz == pytest.approx(reference[0], abs=1e-5)


def test_mean_position_over_whole_turns() -> None:
    """Ripple of any size averages out over whole turns; a plain mean of 0.21 s would be off by its share."""
    t = np.arange(0.0, 0.21, 1e-3)
    phase = 2.0 * np.pi * 20.3 * t
    angle = 0.1 + 0.02 * np.sin(phase + 0.3)
    assert mean_position(t, angle, phase).value == pytest.approx(0.1, abs=3e-5)
    assert abs(angle.mean() - 0.1) > 2e-4


def test_cycle_mean_load() -> None:
    t = np.arange(0.0, 2.0, 1e-3)
    phase = crank(t, 30.0)
    rng = np.random.default_rng(1)
    force = 0.05 + 20.0 * np.sin(2 * np.pi * 30.0 * t) + 0.02 * rng.standard_normal(len(t))
    found = cycle_mean_load(t, force, phase, range_n=(-150.0, 150.0))
    assert found.resolved
    assert found.value == pytest.approx(0.05, abs=4.0 * found.std)
    drifting = cycle_mean_load(t, force, phase, zero_std_n=0.1)
    assert not drifting.resolved and "zero drift" in drifting.reason
    clipped = cycle_mean_load(t, np.clip(force, -10.0, 10.0), phase, range_n=(-10.0, 10.0))
    assert not clipped.resolved and "clips" in clipped.reason


def tapped(impulse: float = 2.0 * DEG, seed: int = 0) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """2 s of rest, then a swing of the given amplitude."""
    rng = np.random.default_rng(seed)
    time = np.arange(6000) * 1e-3
    phase = 2.0 * np.pi * 20.0 * time
    ripple = 0.5 * DEG * np.cos(phase) + 0.15 * DEG * np.cos(2.0 * phase)
    swing = np.where(
        time >= 2.0, impulse * np.exp(-0.5 * (time - 2.0)) * np.sin(4.0 * np.pi * (time - 2.0)), 0.0
    )
    return time, 8.0 * DEG + swing + ripple + 0.03 * DEG * rng.standard_normal(len(time)), phase


def test_taps_are_found_and_timed() -> None:
    time, angle, phase = tapped()
    found = find_taps(time, angle, phase)
    assert found and all(tap.onset_s > 1.9 for tap in found)  # nothing in the quiet part
    assert found[0].onset_s == pytest.approx(2.0, abs=0.015)
    told = refine_tap(time, angle, phase, 2.0)
    assert told.kick_rad_per_s == pytest.approx(2.0 * DEG * 4.0 * np.pi, rel=0.2)  # amplitude times omega
    assert find_taps(time[:2000], angle[:2000], phase[:2000]) == ()


def test_state_of_the_body() -> None:
    time, angle, phase = tapped()
    held = assess(time[:2000], angle[:2000], phase[:2000], stops_rad=STOPS)
    assert held.state == "held" and held.settled
    ringing = assess(time[2000:3500], angle[2000:3500], phase[2000:3500], stops_rad=STOPS)
    assert ringing.state == "held" and not ringing.settled
    lying = assess(time[:2000], np.full(2000, STOPS[0] - 0.001), phase[:2000], stops_rad=STOPS)
    assert lying.state == "at_stop"
    # Thrown from stop to stop at 2.7 Hz, right where the slow mode lives: never "held".
    thrown = np.clip(13.0 * DEG + 20.0 * DEG * np.sin(2 * np.pi * 2.7 * time[:2000]), *STOPS)
    assert assess(time[:2000], thrown, phase[:2000], stops_rad=STOPS).state == "bouncing"
    falling = np.minimum(8.0 * DEG + 15.0 * DEG * time[:2000] ** 2, STOPS[1] + 0.002)
    assert assess(time[:2000], falling, phase[:2000], stops_rad=STOPS).state == "lost"


def test_return_after_a_tap() -> None:
    time, angle, phase = tapped()
    rest = 8.0 * DEG
    back = after_tap(time[2000:], angle[2000:], phase[2000:], rest_rad=rest, stops_rad=STOPS)
    assert back.returned
    gone = np.minimum(angle[2000:] + 10.0 * DEG * (time[2000:] - 2.0), STOPS[1])
    lost = after_tap(time[2000:], gone, phase[2000:], rest_rad=rest, stops_rad=STOPS)
    assert lost.outcome == "lost" and "upper" in lost.reason
    stuck = np.round((angle[2000:] * 0.0 + rest + 2.0 * DEG) / (2 * np.pi / 8192)) * (2 * np.pi / 8192)
    assert after_tap(time[2000:], stuck, phase[2000:], rest_rad=rest, stops_rad=STOPS).outcome == "displaced"


def test_friction_is_told_from_damping() -> None:
    from analysis.decay import fit_decay

    t = np.arange(0.0, 4.0, 1e-3)
    rng = np.random.default_rng(2)

    def fits(straight: bool) -> list:  # type: ignore[type-arg]
        made = []
        for amplitude in (3.0 * DEG, 2.0 * DEG, 1.5 * DEG, 3.5 * DEG):
            envelope = (
                np.maximum(amplitude - 0.8 * DEG * t, 0.0) if straight else amplitude * np.exp(-0.6 * t)
            )
            swing = envelope * np.cos(4 * np.pi * t) + 0.03 * DEG * rng.standard_normal(len(t))
            made.append(fit_decay(t, swing, 2 * np.pi * 20.0 * t))
        return made

    assert judge(fits(False)).verdict == "supported"
    assert judge(fits(True)).verdict == "not_supported"
    assert judge([]).verdict == "not_testable"


def test_planning_formulas() -> None:
    """Limits by hand: (n/A) sqrt(24 / (fs T^3)) for slow decay; dwell until sigma T = 3."""
    assert decay_std(0.05, 1e-3, 1000.0, 2.0, 1e-4) == pytest.approx(
        0.02 * math.sqrt(24.0 / (1000.0 * 8.0)), rel=2e-3
    )
    assert decay_std_slow(0.05, 1e-3, 1000.0, 2.0) == pytest.approx(0.02 * math.sqrt(0.003))
    assert dwell_s(2.0, 1.0) == pytest.approx(3.0)
    assert taps_for(0.1, 0.1) == 4
    with pytest.raises(ValueError, match="positive"):
        decay_std(0.0, 1e-3, 1000.0, 2.0, 0.5)
