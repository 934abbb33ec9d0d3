"""The coded equations of motion against Lagrange's, derived here by computer algebra.

Kinetic and potential energy are written down once more, independently of the code; sympy does the rest.
"""

from __future__ import annotations

import numpy as np
import pytest
import sympy as sp
from rigs import BOOM, COLUMN, GEARED, UNSHAKEN

from analysis.mechanism import equations as eq
from analysis.mechanism.packing import pack
from analysis.mechanism.parameters import Carriage, Mechanism

t = sp.symbols("t")
m, mc, ms, s, h, d, inertia, j, iw, phi, g, ky, a = sp.symbols("m Mc ms s h d I J Iw Phi g ky a")


def accelerations(geometry: str):  # type: ignore[no-untyped-def]
    """A function (constants, state, generalised forces) -> accelerations, from the Lagrangian."""
    theta, psi, y = (sp.Function(name)(t) for name in ("theta", "psi", "y"))
    height = {"floating": y, "geared": a * sp.sin(psi), "clamped": sp.Integer(0)}[geometry]
    coordinates = [theta, psi] + ([y] if geometry == "floating" else [])
    # Centre of mass of the body, d towards the head (rotates up with theta), h above the pivot.
    com_y = height + d * sp.sin(theta) + h * sp.cos(theta)
    com_x = d * sp.cos(theta) - h * sp.sin(theta)
    own = inertia - m * (d**2 + h**2)
    shuttle = height + s * sp.sin(psi)
    wing = phi * sp.sin(psi)
    kinetic = (
        sp.Rational(1, 2) * m * (sp.diff(com_x, t) ** 2 + sp.diff(com_y, t) ** 2)
        + sp.Rational(1, 2) * own * sp.diff(theta, t) ** 2
        + sp.Rational(1, 2) * mc * sp.diff(height, t) ** 2
        + sp.Rational(1, 2) * ms * sp.diff(shuttle, t) ** 2
        + sp.Rational(1, 2) * j * sp.diff(psi, t) ** 2
        + sp.Rational(1, 2) * iw * sp.diff(wing, t) ** 2
    )
    potential = m * g * com_y + mc * g * height + ms * g * shuttle
    if geometry == "floating":
        potential += sp.Rational(1, 2) * ky * y**2 - (m + mc + ms) * g * y  # the spring carries the weight
    lagrangian = kinetic - potential
    forces = sp.symbols(f"Q0:{len(coordinates)}")
    equations = [
        sp.diff(sp.diff(lagrangian, sp.diff(q, t)), t) - sp.diff(lagrangian, q) - force
        for q, force in zip(coordinates, forces, strict=True)
    ]
    second = sp.symbols(f"acc0:{len(coordinates)}")
    first = sp.symbols(f"vel0:{len(coordinates)}")
    zeroth = sp.symbols(f"pos0:{len(coordinates)}")
    swap = [(sp.diff(q, t, 2), symbol) for q, symbol in zip(coordinates, second, strict=True)]
    swap += [(sp.diff(q, t), symbol) for q, symbol in zip(coordinates, first, strict=True)]
    swap += [(q, symbol) for q, symbol in zip(coordinates, zeroth, strict=True)]
    plain = [equation.subs(swap) for equation in equations]
    matrix, right = sp.linear_eq_to_matrix(plain, list(second))
    constants = (m, mc, ms, s, h, d, inertia, j, iw, phi, g, ky, a)
    made = sp.lambdify([constants, zeroth, first, forces], [matrix, right], "numpy", cse=True)

    def solve(values, position, rate, applied):  # type: ignore[no-untyped-def]
        left, column = made(values, position, rate, applied)
        return np.linalg.solve(np.array(left, dtype=float), np.array(column, dtype=float).ravel())

    return solve


def bare(mechanism: Mechanism) -> Mechanism:
    """Without everything that is not in the Lagrangian: air, friction, dampers, stops."""
    return mechanism.with_(
        wing_area_m2=0.0 if mechanism.wing_inertia_kg_m2 == 0.0 else 1e-12,
        air_density_kg_per_m3=1e-12,
        hinge_damping_n_m_s=0.0,
        carriage_damping_n_s_per_m=0.0,
        motor_viscous_n_m_s=0.0,
        motor_coulomb_n_m=0.0,
        stop_low_rad=-10.0,
        stop_high_rad=10.0,
    )


CASES = {
    "floating": BOOM,
    "geared": GEARED,
    "geared column": COLUMN,
    "clamped": UNSHAKEN,
}


@pytest.mark.parametrize("name", CASES)
def test_accelerations(name: str) -> None:
    mechanism = bare(CASES[name])
    solve = accelerations(name.split()[0])
    p = pack(mechanism)
    rng = np.random.default_rng(20)
    constants = (
        mechanism.body_mass_kg,
        mechanism.carriage_mass_kg,
        mechanism.shuttle_mass_kg,
        mechanism.shuttle_throw_m,
        mechanism.cm_height_m,
        mechanism.cm_forward_m,
        mechanism.body_inertia_kg_m2,
        mechanism.flywheel_inertia_kg_m2,
        mechanism.wing_inertia_kg_m2,
        mechanism.wing_stroke_rad,
        mechanism.gravity_m_per_s2,
        mechanism.carriage_stiffness_n_per_m,
        mechanism.shake_amplitude_m,
    )
    floating = mechanism.carriage is Carriage.FLOATING
    for _ in range(20):
        theta, psi, y = rng.uniform(-1.0, 1.0), rng.uniform(-7.0, 7.0), rng.uniform(-0.02, 0.02)
        omega, rate, climb = rng.uniform(-5, 5), rng.uniform(50, 300), rng.uniform(-1, 1)
        amps, push = rng.uniform(-2, 4), rng.uniform(-1e-3, 1e-3)
        x = np.zeros(eq.RECORD)
        x[[eq.THETA, eq.OMEGA, eq.CRANK, eq.RATE, eq.CURRENT]] = theta, omega, psi, rate, amps
        position, speed = [theta, psi], [omega, rate]
        motor = mechanism.gear_ratio * mechanism.motor_constant_n_m_per_a * amps
        applied = [push, motor]
        if floating:
            x[[eq.HEIGHT, eq.CLIMB]] = y, climb
            position.append(y)
            speed.append(climb)
            applied.append(0.0)
        dx = np.zeros(eq.MOTION)
        eq.rates(x, p, eq.MOTION, eq.DRIVEN, 5.0, 1.3, push, False, 0.0, dx)
        expected = solve(constants, position, speed, applied)
        found = [dx[eq.OMEGA], dx[eq.RATE]] + ([dx[eq.CLIMB]] if floating else [])
        np.testing.assert_allclose(found, expected, rtol=2e-9, atol=1e-9)
