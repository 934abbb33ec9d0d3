"""The boundary from levels: on noise-free Floquet data, with noise, and where it must say it cannot."""

from __future__ import annotations

import math

import numpy as np
import pytest

from analysis.averaged import carriage_resonance_hz, coupling
from analysis.boundary.basin import Basin
from analysis.boundary.falling import falling_boundary
from analysis.boundary.form import FittedForm, RigConstants, bias_terms, shape, stable_root
from analysis.boundary.records import LevelPoint, TapPoint
from analysis.boundary.rising import rising_boundary
from analysis.floquet import boundary_by_floquet, mode_at_voltage
from analysis.mechanism.parameters import Mechanism
from rig.files.rig import read_rig
from rig.shipped import find

SIGMA = 0.8


def rig(name: str) -> Mechanism:
    mechanism = read_rig(find(name)).mechanism
    assert mechanism is not None
    return mechanism


def levels(
    mechanism: Mechanism,
    drives: list[float],
    rng: np.random.Generator | None = None,
    direction: str = "falling",
) -> list[LevelPoint]:
    """Levels as Floquet theory has them, with the scatter of single taps under random torque."""
    made = []
    for volts in drives:
        mode = mode_at_voltage(mechanism, volts)
        assert mode is not None
        taps = []
        for kick in (0.3, 0.3):
            kappa_std = 0.02 * mode.stiffness_per_s2 if rng is not None else 0.0
            kappa = mode.stiffness_per_s2 + (rng.normal(0.0, kappa_std) if rng is not None else 0.0)
            amplitude = 1e-3
            std = max(kappa_std, 0.002 * kappa)
            taps.append(TapPoint(kappa, std, mode.decay_per_s, 0.02, amplitude, kick, 4.0))
        angle_std = math.radians(0.05) if rng is not None else 0.0
        angle = mode.mean_angle_rad + (rng.normal(0.0, angle_std) if rng is not None else 0.0)
        made.append(
            LevelPoint(
                direction, mode.flap_hz, volts, angle, angle_std, 0.0, 2.0, True, True, tuple(taps), 2, 2
            )
        )
    return made


def constants(mechanism: Mechanism) -> RigConstants:
    return RigConstants(coupling(mechanism), carriage_resonance_hz(mechanism))


CASES = {
    "boom": ([7.3, 7.4, 7.5, 7.75, 8.0, 8.5, 9.0, 10.0, 12.0], 0.002),
    "boom-geared": ([6.8, 6.9, 7.0, 7.25, 7.5, 8.0, 9.0, 10.0], 0.002),
    "column": ([6.5, 6.6, 6.75, 7.0, 7.5, 8.0, 9.0], 0.004),
}


@pytest.mark.parametrize("name", CASES)
def test_noise_free_bias(name: str) -> None:
    """Truth: this project's own Floquet boundary, itself checked against Mathieu functions."""
    mechanism = rig(name)
    drives, tolerance = CASES[name]
    truth = boundary_by_floquet(mechanism)
    assert truth is not None
    found = falling_boundary(levels(mechanism, drives), constants(mechanism))
    assert found.kind == "divergence"
    assert found.flap_hz == pytest.approx(truth.flap_hz, rel=tolerance)
    assert found.drive_v == pytest.approx(truth.drive_v, rel=2.0 * tolerance)
    assert found.flap_low_hz <= truth.flap_hz <= found.flap_high_hz


def test_interval_holds_with_noise() -> None:
    """40 seeded sweeps of nine levels: the 95 % interval must hold in at least 36 (it is a conservative one)."""
    mechanism = rig("boom")
    truth = boundary_by_floquet(mechanism)
    assert truth is not None
    rng = np.random.default_rng(11)
    inside, errors = 0, []
    for _ in range(40):
        found = falling_boundary(levels(mechanism, CASES["boom"][0], rng), constants(mechanism))
        assert found.kind == "divergence"
        inside += found.flap_low_hz <= truth.flap_hz <= found.flap_high_hz
        errors.append(found.flap_hz / truth.flap_hz - 1.0)
    assert inside >= 36
    assert np.std(errors) < 0.004
    assert abs(np.mean(errors)) < 0.002


def test_boundary_follows_a_heavier_head() -> None:
    """The centre of mass 10 % higher: the boundary found moves as Floquet's does."""
    mechanism = rig("boom").with_(cm_height_m=0.033)
    truth = boundary_by_floquet(mechanism)
    assert truth is not None
    drives = [truth.drive_v * share for share in (1.01, 1.03, 1.06, 1.1, 1.2, 1.35, 1.5)]
    found = falling_boundary(levels(mechanism, drives), constants(mechanism))
    assert found.flap_hz == pytest.approx(truth.flap_hz, rel=0.003)


def test_flutter_is_told_from_divergence() -> None:
    """By hand: the decay rate of the flutter column is zero at 32 Hz."""
    mechanism = rig("column-flutter")
    found = falling_boundary(
        levels(mechanism, [8.2, 8.3, 8.4, 8.6, 8.8, 9.0, 10.0, 11.0]), constants(mechanism)
    )
    assert found.kind == "flutter"
    assert found.flap_hz == pytest.approx(32.0, rel=0.01)
    assert found.flap_low_hz < 32.0 < found.flap_high_hz


def test_not_located_where_it_cannot_be() -> None:
    mechanism = rig("boom")
    assert falling_boundary([], RigConstants()).kind == "not_located"
    few = falling_boundary(levels(mechanism, [7.5, 8.0]), constants(mechanism))
    assert few.kind == "not_located"
    assert "3 are needed" in few.reason
    far = falling_boundary(levels(mechanism, [10.0, 10.5, 11.0, 12.0]), constants(mechanism))
    assert far.kind == "not_located" or far.flap_high_hz - far.flap_low_hz > 1.0


def test_lost_above_the_boundary_is_told() -> None:
    mechanism = rig("boom")
    points = levels(mechanism, CASES["boom"][0])
    lost = LevelPoint(
        "falling", 29.0, 8.1, 0.2, 0.001, 0.0, 2.0, False, True, (), 0, 0, lost_kick_rad_per_s=0.0
    )
    found = falling_boundary([*points, lost], constants(mechanism))
    assert "by another cause" in found.reason


def test_rising_is_the_first_level_that_holds() -> None:
    """Clopper-Pearson for 1 of 2 attempts: 0.0126 to 0.9874 (scipy.stats)."""

    def level(flap: float, held: bool, tried: int, returned: int) -> LevelPoint:
        return LevelPoint("rising", flap, flap / 3.6, 0.1, 0.0, 0.0, 2.0, held, False, (), tried, returned)

    found = rising_boundary(
        [level(25, False, 2, 0), level(26, False, 2, 0), level(27, True, 4, 2), level(28, True, 4, 4)]
    )
    assert found.kind == "capture"
    assert (found.flap_hz, found.flap_low_hz, found.flap_high_hz) == (27, 26, 27)
    assert "1 of 2 attempts" in found.reason and "0.01 to 0.99" in found.reason
    assert rising_boundary([level(25, False, 2, 0), level(26, False, 2, 0)]).kind == "not_located"
    assert rising_boundary([level(25, True, 2, 0), level(26, True, 2, 0)]).kind == "not_located"
    assert rising_boundary([]).kind == "not_located"


def test_form_at_its_own_fold() -> None:
    """At f = fc the rest is at phic and its stiffness zero, by construction of r and b."""
    for phic in (0.05, 0.3, 0.5):
        r, b = bias_terms(np.array(phic), 0.1)
        value, slope = shape(np.array(phic), 0.1)
        assert float(value - r * np.sin(phic) - b) == pytest.approx(0.0, abs=1e-12)
        assert float(slope - r * np.cos(phic)) == pytest.approx(0.0, abs=1e-12)
        above = float(stable_root(np.array(1.2), r, b, 0.1))
        assert 0.0 < above < phic
        assert math.isnan(float(stable_root(np.array(0.98), r, b, 0.1)))


def test_basin_against_energy() -> None:
    """Without damping the critical kick is the height of the saddle: v^2 / 2 = integral of G from rest to saddle."""
    form = FittedForm(25.0, 0.4, 300.0, 0.0, 1.0, 1.0, RigConstants())
    basin = Basin(form, 0.0, -2.0, 2.0)
    x, r, bias = form.terms(27.0)
    rest = form.rest_rad(27.0)
    grid = np.linspace(rest, 1.4, 200_001)
    torque = form.rate_per_s2 * (x * shape(grid, 0.0)[0] - r * np.sin(grid) - bias)
    saddle = int(np.argmax((torque < 0.0) & (grid > rest + 0.01)))
    barrier = np.trapezoid(torque[:saddle], grid[:saddle])
    assert basin.critical_kick(27.0, 1.0) == pytest.approx(math.sqrt(2.0 * barrier), rel=0.02)
    assert basin.critical_kick(24.0, 1.0) == 0.0
    assert basin.survived_from(0.5) > basin.survived_from(0.2) > 25.0
