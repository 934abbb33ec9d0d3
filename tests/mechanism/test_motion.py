"""The plant in time: against another integrator, its own energies, and hand calculation."""

from __future__ import annotations

import math

import numpy as np
from rigs import BOOM, COLUMN, GEARED
from scipy.integrate import solve_ivp

from analysis.mechanism import equations as eq
from analysis.mechanism.ambient import noise_density_for_rms
from analysis.mechanism.disturbance import Disturbance
from analysis.mechanism.plant import COASTING, OUT_CONTACT, OUT_CRANK, OUT_THETA, Plant
from analysis.mechanism.steady import steady_flap_hz


def settled(mechanism, volts: float, **options) -> Plant:  # type: ignore[no-untyped-def]
    plant = Plant(mechanism, options.pop("disturbance", None), theta_rad=0.15, **options)
    plant.drive(volts, 20.0)
    plant.hold(0.15)
    plant.advance(4000)
    plant.let_go()
    return plant


def test_against_dop853() -> None:
    """scipy's DOP853 at rtol 1e-10 on the same right-hand side, half a second without contact."""
    for mechanism, volts in ((BOOM, 9.0), (GEARED, 9.0), (COLUMN, 9.0)):
        plant = settled(mechanism, volts)
        start = plant.record.copy()
        p = plant.parameters
        # The winding warms by less than a millikelvin in half a second; it is held still here.
        ohm = mechanism.motor_resistance_ohm * (
            1.0 + mechanism.copper_coefficient_per_k * (plant.winding_deg_c - 25.0)
        )

        def right(_: float, state, p=p, volts=volts, ohm=ohm):  # type: ignore[no-untyped-def]
            x = np.zeros(eq.RECORD)
            x[: eq.MOTION] = state
            dx = np.zeros(eq.MOTION)
            eq.rates(x, p, eq.MOTION, eq.DRIVEN, volts, ohm, 0.0, False, 0.0, dx)
            return dx

        rows = plant.advance(500)
        assert rows[:, OUT_CONTACT].max() == 0.0
        times = np.arange(1, 501) * 1e-3
        found = solve_ivp(
            right, (0.0, 0.5), start[: eq.MOTION], "DOP853", times, rtol=1e-10, atol=1e-12, max_step=1e-3
        )
        np.testing.assert_allclose(rows[:, OUT_THETA], found.y[eq.THETA], rtol=0.0, atol=math.radians(5e-3))
        np.testing.assert_allclose(rows[:, OUT_CRANK], found.y[eq.CRANK], rtol=0.0, atol=2e-3)


def test_energy_balance() -> None:
    """What comes in from supply and taps is stored or lost, also through bounces on the end stops."""
    for mechanism, volts, tolerance in ((BOOM, 9.0, 1e-6), (BOOM, 6.0, 2e-3), (COLUMN, 9.0, 1e-6)):
        plant = settled(mechanism, volts, energies=True, always_fine=True)
        before = stored(plant, mechanism), plant.record.copy()
        plant.tap(1e-4, 0.01)
        plant.advance(2000)
        after = stored(plant, mechanism), plant.record
        moved = after[1][eq.SUPPLIED : eq.STOPS + 1] - before[1][eq.SUPPLIED : eq.STOPS + 1]
        came = moved[0] + moved[1]
        went = float(moved[2:].sum())
        assert came > 1.0
        assert abs(came - went - (after[0] - before[0])) < tolerance * came


def stored(plant: Plant, mechanism) -> float:  # type: ignore[no-untyped-def]
    """Kinetic and potential energy, written out anew."""
    x = plant.record
    theta, omega, rate, psi = x[eq.THETA], x[eq.OMEGA], x[eq.RATE], x[eq.CRANK]
    if mechanism.carriage == 1:
        y = mechanism.shake_amplitude_m * math.sin(psi)
        v = mechanism.shake_amplitude_m * math.cos(psi) * rate
    else:
        y, v = x[eq.HEIGHT], x[eq.CLIMB]
    m, h, d = mechanism.body_mass_kg, mechanism.cm_height_m, mechanism.cm_forward_m
    offset = d * math.cos(theta) - h * math.sin(theta)
    kinetic = (
        0.5 * (m + mechanism.carriage_mass_kg) * v**2
        + m * offset * v * omega
        + 0.5 * mechanism.body_inertia_kg_m2 * omega**2
        + 0.5 * mechanism.shuttle_mass_kg * (v + mechanism.shuttle_throw_m * math.cos(psi) * rate) ** 2
        + 0.5 * mechanism.flywheel_inertia_kg_m2 * rate**2
        + 0.5 * mechanism.wing_inertia_kg_m2 * (mechanism.wing_stroke_rad * math.cos(psi) * rate) ** 2
        + 0.5 * mechanism.motor_inductance_h * x[eq.CURRENT] ** 2
    )
    g = mechanism.gravity_m_per_s2
    potential = m * g * (d * math.sin(theta) + h * math.cos(theta))
    potential += mechanism.shuttle_mass_kg * g * mechanism.shuttle_throw_m * math.sin(psi)
    potential += 0.5 * mechanism.carriage_stiffness_n_per_m * y**2
    if not mechanism.weight_preloaded:
        potential += mechanism.total_mass_kg * g * y
    depth = max(theta - mechanism.stop_high_rad, mechanism.stop_low_rad - theta, 0.0)
    return kinetic + potential + 0.5 * mechanism.stop_stiffness_n_m_per_rad * depth**2


def test_flap_rate_follows_the_balance_of_torques() -> None:
    """Mean torques over a turn, by hand, against the whole motion."""
    for volts in (7.5, 10.0, 12.0):
        plant = settled(BOOM, volts)
        rows = plant.advance(4000)
        turned = (rows[-1, OUT_CRANK] - rows[0, OUT_CRANK]) / (2.0 * math.pi) / 3.999
        expected = steady_flap_hz(BOOM, volts, plant.winding_deg_c)[0]
        assert abs(turned / expected - 1.0) < 0.005


def test_coast_down_takes_seconds() -> None:
    """From 43 Hz about 5 s (boom) and 14 s (column): no halt is instant."""
    for mechanism, low, high in ((BOOM, 4.0, 6.5), (COLUMN, 11.0, 17.0)):
        plant = settled(mechanism, 12.0)
        plant.motor(COASTING)
        time_s = 0.0
        while plant.flap_hz > 0.2 and time_s < 30.0:
            plant.advance(50)
            time_s += 0.05
        assert low < time_s < high


def test_sticking_hinge_really_sticks() -> None:
    """Below the breakaway torque the body does not creep: the same angle, to the last digit, after 20 s."""
    still = BOOM.with_(wing_area_m2=0.0, cm_height_m=-0.03, cm_forward_m=0.0)  # hangs; the crank rests
    plant = Plant(still, Disturbance(hinge_sticking_n_m=1e-3), theta_rad=0.02)
    plant.advance(2000)
    first = plant.theta_rad
    plant.advance(20_000)
    assert plant.theta_rad == first
    assert abs(first) > 1e-3


def test_ambient_motion_is_as_restless_as_asked() -> None:
    """0.1 deg rms asked at 1.2 times the boundary; found within statistics of 60 s, drift and ripple apart."""
    rms = math.radians(0.1)
    density = noise_density_for_rms(BOOM, rms)
    plant = settled(BOOM, 8.62, disturbance=Disturbance(seed=5, torque_noise_n_m_per_rt_hz=density))
    plant.advance(5000)
    theta = plant.advance(60_000)[:, OUT_THETA]
    slow = theta[: len(theta) // 100 * 100].reshape(-1, 100).mean(axis=1)
    assert abs(slow.std() / rms - 1.0) < 0.35


def test_rows_do_not_depend_on_how_they_are_grouped() -> None:
    density = noise_density_for_rms(BOOM, 1e-3)
    plants = [
        settled(BOOM, 9.0, disturbance=Disturbance(seed=3, torque_noise_n_m_per_rt_hz=density)) for _ in "ab"
    ]
    whole = plants[0].advance(700)
    parts = np.concatenate([plants[1].advance(n).copy() for n in (1, 7, 200, 492)])
    np.testing.assert_array_equal(whole, parts)
