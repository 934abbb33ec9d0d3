"""Vibration and passivity verdicts."""

from __future__ import annotations

import math

import numpy as np
import pytest
import statsmodels.api as sm

from analysis import passivity, vibration
from analysis.vibration import StiffnessPoint

RNG = np.random.default_rng(4)


def line(slope: float, intercept: float, bend: float = 0.0) -> list[StiffnessPoint]:
    points = []
    for flap in (30.0, 32.0, 34.0, 36.0, 39.0, 43.0):
        kappa = intercept + slope * flap**2 + bend * (flap - 36.0) ** 2
        points.append(StiffnessPoint(flap, kappa + RNG.normal(0.0, 0.3), 0.3))
    return points


def test_slope_against_statsmodels() -> None:
    """Weighted least squares of statsmodels with the same weights."""
    points = line(0.2487, -137.0)
    found = vibration.judge(points, boundary_hz=26.0, shake_amplitude_m=8e-3, length_m=0.0714)
    square = np.array([point.flap_hz**2 for point in points])
    kappa = np.array([point.stiffness_per_s2 for point in points])
    weight = 1.0 / (0.3**2 + (vibration.MODEL_FLOOR * kappa) ** 2)
    reference = sm.WLS(kappa, sm.add_constant(square), weights=weight).fit()
    assert found.slope == pytest.approx(reference.params[1], rel=1e-9)
    assert found.theory_slope == pytest.approx((2.0 * math.pi * 8e-3 / 0.0714) ** 2 / 2.0)


def test_verdicts_on_vibration() -> None:
    theory = (2.0 * math.pi * 8e-3 / 0.0714) ** 2 / 2.0
    clamped = [StiffnessPoint(flap, -137.0, 1.0) for flap in (25.0, 45.0)]

    def verdict(points, **more):  # type: ignore[no-untyped-def]
        return vibration.judge(points, boundary_hz=26.0, shake_amplitude_m=8e-3, length_m=0.0714, **more)

    assert verdict(line(theory, -137.0)).verdict == "not_testable"
    assert "clamped" in verdict(line(theory, -137.0)).reason
    assert verdict(line(theory, -137.0), control=clamped).verdict == "supported"
    assert verdict(line(0.5 * theory, -137.0)).verdict == "not_supported"
    assert verdict(line(theory, -137.0, bend=1.0)).verdict == "not_supported"
    assert verdict(line(theory, -137.0)[:3]).verdict == "not_testable"
    unknown = vibration.judge(line(theory, -137.0), boundary_hz=26.0, shake_amplitude_m=None, length_m=0.07)
    assert (unknown.verdict, "shake amplitude" in unknown.reason) == ("not_testable", True)


def swing(gain: float, seed: int) -> passivity.Gain:
    rng = np.random.default_rng(seed)
    time = np.arange(0.0, 4.0, 1e-3)
    angle = 0.05 * np.exp(-0.8 * time) * np.cos(9.0 * time) + 0.01 * np.sin(180.0 * time)
    volts = 8.0 + gain * angle + 0.01 * rng.standard_normal(len(time))
    found = passivity.voltage_gain(time, angle, volts)
    assert found is not None
    return found


def test_gain_is_found_with_an_honest_uncertainty() -> None:
    """Of 200 records without feedback about 5 % may lie beyond 1.96 standard uncertainties (binomial: 3 to 20)."""
    found = [swing(0.0, seed) for seed in range(200)]
    beyond = sum(abs(gain.value) > 1.96 * gain.std for gain in found)
    assert 3 <= beyond <= 20
    assert swing(0.5, 1).value == pytest.approx(0.5, abs=4.0 * swing(0.5, 1).std)


def test_verdicts_on_passivity() -> None:
    quiet = [swing(0.0, seed) for seed in range(10)]
    assert passivity.judge([0] * 20, quiet, True).verdict == "supported"
    assert passivity.judge([0, 1], quiet, True).verdict == "not_supported"
    assert (
        passivity.judge([0] * 20, [swing(0.3, seed) for seed in range(10)], True).verdict == "not_supported"
    )
    assert passivity.judge([], quiet, False).verdict == "not_testable"
    assert passivity.judge([0] * 20, [], True).verdict == "not_testable"
