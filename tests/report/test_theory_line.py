"""The theory line belongs to the rig's own constants."""

import math
from dataclasses import replace

import numpy as np
from invented_session import Invented

from analysis.mechanism.parameters import Carriage, Mechanism
from rig.report import averaged_curve

#: A vibrated upright pendulum: crank-driven pivot, nothing else.
PENDULUM = Mechanism(
    Carriage.GEARED, 0.03, 0.062, 0.0, 1.488e-4, 0.04, 2.5e-4, 1.3, 2.5e-4, 0.0066, 6.0, 1.5e-4, -1.0, 1.0,
    shake_amplitude_m=0.008,
)  # fmt: skip


def test_pendulum_follows_the_textbook(short_session: Invented) -> None:
    # P. L. Kapitza 1951; Landau & Lifshitz, Mechanics, section 30: kappa = (a w)^2 / (2 L^2) - g / L upright.
    rig = replace(short_session.rig, mechanism=PENDULUM, unknown=())
    curve = averaged_curve(rig, short_session.result)
    assert curve is not None
    length, gravity = 1.488e-4 / (0.03 * 0.062), 9.80665
    shaking = 0.008 * 2.0 * math.pi * curve.flap_hz
    np.testing.assert_allclose(
        curve.stiffness_per_s2, shaking**2 / (2.0 * length**2) - gravity / length, rtol=1e-6, atol=0.05
    )
    edge_hz = math.sqrt(2.0 * gravity * length) / (2.0 * math.pi * 0.008)
    assert abs(curve.flap_hz[0] / edge_hz - 1.0) < 1e-4
    assert curve.decay_per_s is not None
    # Hinge damping alone: c / (2 I).
    np.testing.assert_allclose(curve.decay_per_s, 1.5e-4 / (2.0 * 1.488e-4), rtol=1e-9)


def test_unknown_damping_leaves_the_decay_rate_out(short_session: Invented) -> None:
    rig = replace(
        short_session.rig, mechanism=PENDULUM, unknown=("hinge_damping_n_m_s", "motor_inductance_h")
    )
    curve = averaged_curve(rig, short_session.result)
    assert curve is not None
    assert curve.decay_per_s is None


def test_no_line_without_the_constants_it_needs(short_session: Invented) -> None:
    rig = replace(short_session.rig, mechanism=PENDULUM, unknown=("cm_height_m",))
    assert averaged_curve(rig, short_session.result) is None
    assert averaged_curve(replace(rig, mechanism=None, unknown=()), short_session.result) is None


def test_no_line_where_nothing_shakes(short_session: Invented) -> None:
    clamped = PENDULUM.with_(carriage=Carriage.CLAMPED)
    assert (
        averaged_curve(replace(short_session.rig, mechanism=clamped, unknown=()), short_session.result)
        is None
    )
