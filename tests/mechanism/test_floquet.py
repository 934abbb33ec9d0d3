"""Boundaries and slow modes of the complete mechanism, against Mathieu functions and reference values.

Reference values: periodic-orbit branches computed independently beforehand (another implementation); the
tables were run with a copper coefficient of 0.00393 per K.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from rigs import BOOM, COLUMN, FLUTTER, GEARED, UNSHAKEN
from scipy.integrate import solve_ivp
from scipy.special import mathieu_a

from analysis.averaged import averaged_fold, unbiased_boundary_hz
from analysis.floquet import boundary_by_floquet, boundary_prescribed, mode_at_flap, mode_at_voltage
from analysis.mathieu import lower_boundary_hz, mathieu_boundary_hz, upper_boundary_hz


@pytest.mark.parametrize(
    ("mechanism", "hertz", "volts", "volts_hot", "kind"),
    [
        (BOOM, 25.8620, 7.2340, 7.2809, "fold"),
        (GEARED, 26.5874, 6.7345, 6.7415, "fold"),
        (COLUMN, 25.0038, 6.4116, 6.4228, "pitchfork"),
    ],
)
def test_boundaries(mechanism, hertz: float, volts: float, volts_hot: float, kind: str) -> None:  # type: ignore[no-untyped-def]
    found, hot = boundary_by_floquet(mechanism), boundary_by_floquet(mechanism, 40.0)
    assert found is not None and hot is not None
    assert found.kind == kind
    assert found.flap_hz == pytest.approx(hertz, rel=4e-5)
    assert found.drive_v == pytest.approx(volts, rel=4e-5)
    assert hot.drive_v == pytest.approx(volts_hot, rel=3e-4)
    assert hot.flap_hz == pytest.approx(found.flap_hz, rel=3e-5)  # in frequency the boundary does not move


@pytest.mark.parametrize(("ratio", "hertz"), [(0.05, 49.878), (0.10, 24.995), (0.20, 12.614)])
def test_column_over_shake_ratio(ratio: float, hertz: float) -> None:
    """Reference table, carriage of 20 g."""
    column = COLUMN.with_(carriage_mass_kg=0.02, shake_amplitude_m=0.08 * ratio)
    found = boundary_by_floquet(column)
    assert found is not None
    assert found.flap_hz == pytest.approx(hertz, rel=1e-4)


@pytest.mark.parametrize("ratio", [0.05, 0.1, 0.2, 0.4])
def test_prescribed_column_is_mathieu(ratio: float) -> None:
    """DLMF chapter 28 by scipy.special: undamped column at constant crank rate."""
    column = COLUMN.with_(hinge_damping_n_m_s=0.0, shake_amplitude_m=0.08 * ratio)
    length = column.body_inertia_kg_m2 / (column.body_mass_kg * column.cm_height_m)
    amplitude = 0.08 * ratio
    value = float(mathieu_a(0, 2.0 * amplitude / length))
    expected = math.sqrt(-4.0 * column.gravity_m_per_s2 / (length * value)) / (2.0 * math.pi)
    found = boundary_prescribed(column)
    assert found is not None
    assert found.flap_hz == pytest.approx(expected, rel=3e-6)
    assert mathieu_boundary_hz(column) == pytest.approx(expected, rel=1e-9)


def test_mathieu_values() -> None:
    """DLMF 28 tables, recomputed: a0(1) = -0.4551386041; the upper limit exists above a/L = 0.454 only."""
    assert float(mathieu_a(0, 1.0)) == pytest.approx(-0.4551386041, abs=1e-9)
    assert float(mathieu_a(0, 5.0)) == pytest.approx(-5.8000460209, abs=1e-9)
    assert upper_boundary_hz(0.45, 1.0) is None
    upper = upper_boundary_hz(0.46, 1.0)
    assert upper is not None and upper > lower_boundary_hz(0.46, 1.0)
    with pytest.raises(ValueError, match="positive"):
        lower_boundary_hz(0.0, 1.0)


def test_averaged_fold() -> None:
    """Reference table: averaged fold 26.01 and 26.44 Hz; Kapitza's a w = sqrt(2 g L) 23.08, 23.54, 24.92 Hz."""
    boom, geared, column = averaged_fold(BOOM), averaged_fold(GEARED), averaged_fold(COLUMN)
    assert boom is not None and geared is not None and column is not None
    assert (boom.kind, column.kind) == ("fold", "pitchfork")
    assert boom.flap_hz == pytest.approx(26.01, abs=0.01)
    assert geared.flap_hz == pytest.approx(26.44, abs=0.01)
    assert unbiased_boundary_hz(BOOM) == pytest.approx(23.08, abs=0.02)
    assert unbiased_boundary_hz(GEARED) == pytest.approx(23.54, abs=0.02)
    length = COLUMN.body_inertia_kg_m2 / (COLUMN.body_mass_kg * COLUMN.cm_height_m)
    kapitza = math.sqrt(2.0 * COLUMN.gravity_m_per_s2 * length) / (2.0 * math.pi * COLUMN.shake_amplitude_m)
    assert column.flap_hz == pytest.approx(kapitza, rel=1e-9)


def test_clamped_is_never_held() -> None:
    assert averaged_fold(UNSHAKEN) is None
    assert boundary_by_floquet(UNSHAKEN) is None
    assert mode_at_voltage(UNSHAKEN, 10.0) is None
    assert mathieu_boundary_hz(UNSHAKEN) is None


@pytest.mark.parametrize(
    ("volts", "hertz", "mode", "decay"),
    [
        (12.0, 47.069, 2.833, 1.1397),
        (9.0, 35.224, 1.765, 0.4457),
        (8.2, 32.065, 1.429, 0.0108),
        (8.1, 31.670, 1.384, -0.0567),
        (7.5, 29.301, 1.084, -0.539),
    ],
)
def test_flutter_modes(volts: float, hertz: float, mode: float, decay: float) -> None:
    """Reference checks of the flutter variant."""
    found = mode_at_voltage(FLUTTER, volts)
    assert found is not None
    assert found.flap_hz == pytest.approx(hertz, rel=5e-5)
    assert found.mode_hz == pytest.approx(mode, abs=1.5e-3)
    assert found.decay_per_s == pytest.approx(decay, abs=1.5e-3)


def test_flutter_boundary() -> None:
    """sigma(f) = [ch - cF exp(-f / 8 Hz)] / (2 I) is zero at 32 Hz by hand; Floquet 32.0006 Hz, 8.1837 V."""
    found = boundary_by_floquet(FLUTTER)
    assert found is not None
    assert found.kind == "flutter"
    assert found.flap_hz == pytest.approx(32.0, abs=0.002)
    assert found.drive_v == pytest.approx(8.1837, abs=0.0005)


def test_mode_against_a_free_swing() -> None:
    """The multipliers against scipy's DOP853 of the averaged swing: frequency and decay within 2 %."""
    found = mode_at_flap(COLUMN, 35.0)
    assert found is not None
    length = COLUMN.body_inertia_kg_m2 / (COLUMN.body_mass_kg * COLUMN.cm_height_m)
    damping = COLUMN.hinge_damping_n_m_s / COLUMN.body_inertia_kg_m2
    rate, a, g = 2.0 * math.pi * 35.0, COLUMN.shake_amplitude_m, COLUMN.gravity_m_per_s2

    def right(time: float, x):  # type: ignore[no-untyped-def]
        pull = (g - a * rate**2 * math.sin(rate * time)) / length
        return [x[1], pull * math.sin(x[0]) - damping * x[1]]

    times = np.arange(0, 140) / 35.0
    swing = solve_ivp(right, (0.0, 4.0), [1e-4, 0.0], "DOP853", times, rtol=1e-10, atol=1e-15).y[0]
    # Once a turn the swing is a sampled damped sinusoid: linear prediction gives its pole (Prony 1795).
    pairs = np.column_stack([swing[1:-1], swing[:-2]])
    one, two = np.linalg.lstsq(pairs, swing[2:], rcond=None)[0]
    pole = np.log(np.roots([1.0, -one, -two])[0]) * 35.0
    assert found.mode_hz == pytest.approx(abs(pole.imag) / (2.0 * math.pi), rel=2e-3)
    assert found.decay_per_s == pytest.approx(-pole.real, rel=2e-3)


def test_boundary_follows_the_height_of_the_centre_of_mass() -> None:
    hertz = [boundary_by_floquet(BOOM.with_(cm_height_m=0.03 * share)) for share in (0.7, 0.9, 1.0, 1.1, 1.3)]
    assert all(found is not None for found in hertz)
    values = [found.flap_hz for found in hertz if found is not None]
    assert values == sorted(values, reverse=True)
