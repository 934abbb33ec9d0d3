"""Averaged (Kapitza) theory of a shaken body: effective torque, equilibrium, stiffness and the fold.

With phi the angle from the direction in which the centre of mass is above the pivot, r its distance,

    I theta'' = m g r sin phi + T_L(w) - S(w) B(phi) - c theta'
    S(w) = (m r a w)^2 / (2 I)          B(phi) = sin phi cos phi

a(w) the shake amplitude, T_L the mean lift torque (quasi-steady, grows with w^2). Without lift and offset the
body becomes stable at a w = sqrt(2 g L), L = I / (m r); with them the pitchfork unfolds into a fold some per
cent higher.

It misleads for large a/L (terms of order (a/L)^2 are dropped: 0.2 % of the flap rate at a/L = 0.1, over 1 %
at 0.2) and near the carriage's resonance.

References: P. L. Kapitza, 1951; L. D. Landau, E. M. Lifshitz, Mechanics, section 30 (values from memory).
Wing coefficients: M. H. Dickinson, F.-O. Lehmann, S. P. Sane, Science 284 (1999) 1954 (from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from analysis.mechanism.parameters import Carriage, Mechanism

TWO_PI = 2.0 * math.pi
#: Angles searched for an equilibrium; beyond, gravity and shaking have both turned over.
FARTHEST_RAD = math.radians(75.0)


@dataclass(frozen=True)
class Equilibrium:
    """Where the averaged body rests at one flap rate, and how stiffly: rad, 1/s^2, 1/s, Hz."""

    flap_hz: float
    angle_rad: float
    stiffness_per_s2: float
    decay_per_s: float

    @property
    def mode_hz(self) -> float:
        """Damped frequency; 0 where overdamped."""
        return math.sqrt(max(self.stiffness_per_s2 - self.decay_per_s**2, 0.0)) / TWO_PI


@dataclass(frozen=True)
class AveragedBoundary:
    """The averaged boundary: flap rate in Hz and body angle in rad at the fold (pitchfork: phi = 0)."""

    flap_hz: float
    angle_rad: float
    kind: str  # "fold" | "pitchfork"


def cm_distance_m(mechanism: Mechanism) -> float:
    """Distance r of the centre of mass from the pivot."""
    return math.hypot(mechanism.cm_height_m, mechanism.cm_forward_m)


def cm_angle_rad(mechanism: Mechanism) -> float:
    """Body angle at which the centre of mass is straight above the pivot."""
    return math.atan2(mechanism.cm_forward_m, mechanism.cm_height_m)


def coupling(mechanism: Mechanism) -> float:
    """mu: how much of the body's inertia is tied to a carriage that floats."""
    if mechanism.carriage is not Carriage.FLOATING:
        return 0.0
    moment = mechanism.body_mass_kg * cm_distance_m(mechanism)
    return moment**2 / (mechanism.body_inertia_kg_m2 * mechanism.total_mass_kg)


def carriage_resonance_hz(mechanism: Mechanism) -> float:
    """f0 of a floating carriage on its spring; 0 for the others."""
    if mechanism.carriage is not Carriage.FLOATING:
        return 0.0
    return math.sqrt(mechanism.carriage_stiffness_n_per_m / mechanism.total_mass_kg) / TWO_PI


def shake_amplitude_m(mechanism: Mechanism, flap_hz: float) -> float:
    """Amplitude of the pivot's vertical motion at a flap rate."""
    if mechanism.carriage is Carriage.CLAMPED:
        return 0.0
    if mechanism.carriage is Carriage.GEARED:
        return mechanism.shake_amplitude_m
    w = TWO_PI * flap_hz
    spring = mechanism.carriage_stiffness_n_per_m - mechanism.total_mass_kg * w**2
    force = mechanism.shuttle_mass_kg * mechanism.shuttle_throw_m * w**2
    return force / math.hypot(spring, mechanism.carriage_damping_n_s_per_m * w)


def lift_torque_n_m(mechanism: Mechanism, flap_hz: float) -> float:
    """Mean torque of the wings' lift about the hinge."""
    speed = mechanism.wing_radius_m * mechanism.wing_stroke_rad * TWO_PI * flap_hz
    lift = 0.225 + 1.58 * math.sin(2.13 * mechanism.wing_incidence_rad - math.radians(7.2))
    pressure = 0.5 * mechanism.air_density_kg_per_m3 * mechanism.wing_area_m2 * speed**2 / 2.0
    return mechanism.wing_arm_m * pressure * lift


def decay_per_s(mechanism: Mechanism, flap_hz: float) -> float:
    """Decay rate of the slow mode: hinge damping and the wings' damping, which grows with flap rate."""
    angle = mechanism.wing_incidence_rad
    slope = 1.58 * 2.13 * math.cos(2.13 * angle - math.radians(7.2))
    drag = 1.92 - 1.55 * math.cos(2.04 * angle - math.radians(9.82))
    speed = mechanism.wing_radius_m * mechanism.wing_stroke_rad * TWO_PI * flap_hz
    pressure = 0.5 * mechanism.air_density_kg_per_m3 * mechanism.wing_area_m2
    wings = pressure * (slope + drag) * (2.0 / math.pi) * speed * mechanism.wing_arm_m**2
    hinge = mechanism.hinge_damping_n_m_s - mechanism.flutter_damping_n_m_s * math.exp(
        -TWO_PI * flap_hz / mechanism.flutter_decay_rad_per_s
    )
    return (hinge + wings) / (2.0 * mechanism.body_inertia_kg_m2)


def _shaking(mechanism: Mechanism, flap_hz: float) -> float:
    """S(w), N m."""
    speed = shake_amplitude_m(mechanism, flap_hz) * TWO_PI * flap_hz
    moment = mechanism.body_mass_kg * cm_distance_m(mechanism)
    return (moment * speed) ** 2 / (2.0 * mechanism.body_inertia_kg_m2)


def _weight(mechanism: Mechanism) -> float:
    """m g r, N m."""
    return mechanism.body_mass_kg * mechanism.gravity_m_per_s2 * cm_distance_m(mechanism)


def _shape(phi: float) -> tuple[float, float]:
    """B(phi) and its derivative."""
    sine, cosine = math.sin(phi), math.cos(phi)
    return sine * cosine, cosine**2 - sine**2


def _largest_restoring(mechanism: Mechanism, flap_hz: float) -> tuple[float, float]:
    """Largest restoring torque over phi > 0 and where: positive if the averaged body can be held."""
    shaking, weight = _shaking(mechanism, flap_hz), _weight(mechanism)
    phi = np.linspace(0.0, FARTHEST_RAD, 1501)[1:]
    sine, cosine = np.sin(phi), np.cos(phi)
    torque = shaking * sine * cosine - weight * sine
    best = int(np.argmax(torque))
    near = float(phi[best])
    for _ in range(40):  # the maximum between grid points
        step = 1e-4
        slope = shaking * _shape(near)[1] - weight * math.cos(near)
        bend = shaking * (_shape(near + step)[1] - _shape(near - step)[1]) / (2.0 * step) + weight * math.sin(
            near
        )
        if bend >= 0.0 or abs(slope / bend) < 1e-12:
            break
        near = min(max(near - slope / bend, 1e-6), FARTHEST_RAD)
    value = shaking * _shape(near)[0] - weight * math.sin(near)
    return value - abs(lift_torque_n_m(mechanism, flap_hz)), near


def averaged_fold(mechanism: Mechanism, highest_hz: float = 400.0) -> AveragedBoundary | None:
    """Lowest flap rate at which the averaged body has a stable rest; None if there is none (no shaking).

    The coupling to a floating carriage is left out here: with constants alone it moves the prediction away from
    the full model, for it and the neglected terms of order (a/L)^2 partly cancel. A fit to data uses it.
    """
    if mechanism.carriage is Carriage.CLAMPED:
        return None
    lowest = max(1.2 * carriage_resonance_hz(mechanism), 0.5)
    low, high = lowest, lowest
    while _largest_restoring(mechanism, high)[0] <= 0.0:
        low, high = high, 1.05 * high
        if high > highest_hz:
            return None
    for _ in range(80):
        middle = 0.5 * (low + high)
        if _largest_restoring(mechanism, middle)[0] > 0.0:
            high = middle
        else:
            low = middle
        if high - low < 1e-10 * high:
            break
    biased = abs(lift_torque_n_m(mechanism, high)) > 0.0
    if not biased:
        return AveragedBoundary(high, cm_angle_rad(mechanism), "pitchfork")
    phi = math.copysign(_largest_restoring(mechanism, high)[1], lift_torque_n_m(mechanism, high))
    return AveragedBoundary(high, cm_angle_rad(mechanism) + phi, "fold")


def unbiased_boundary_hz(mechanism: Mechanism) -> float | None:
    """Flap rate at which a w = sqrt(2 g L), L = I / (m r): the textbook boundary; None unshaken."""
    bare = mechanism.with_(wing_area_m2=0.0)
    found = averaged_fold(bare)
    return None if found is None else found.flap_hz


def equilibrium(mechanism: Mechanism, flap_hz: float) -> Equilibrium | None:
    """The stable rest at a flap rate; None below the fold."""
    spare, top = _largest_restoring(mechanism, flap_hz)
    if spare < 0.0 or mechanism.carriage is Carriage.CLAMPED:
        return None
    shaking, weight = _shaking(mechanism, flap_hz), _weight(mechanism)
    lift = lift_torque_n_m(mechanism, flap_hz)
    low, high = 0.0, top
    for _ in range(80):
        phi = 0.5 * (low + high)
        if shaking * _shape(phi)[0] - weight * math.sin(phi) < abs(lift):
            low = phi
        else:
            high = phi
    phi = math.copysign(0.5 * (low + high), lift) if lift else 0.0
    stiffness = (shaking * _shape(phi)[1] - weight * math.cos(phi)) / mechanism.body_inertia_kg_m2
    if stiffness <= 0.0:
        return None
    return Equilibrium(flap_hz, cm_angle_rad(mechanism) + phi, stiffness, decay_per_s(mechanism, flap_hz))


def stiffness_slope(mechanism: Mechanism, shake_m: float) -> float:
    """d(kappa)/d(f^2) of the unbiased body for a shake amplitude: (2 pi a / L)^2 / 2, dimensionless."""
    moment = mechanism.body_mass_kg * cm_distance_m(mechanism)
    length = mechanism.body_inertia_kg_m2 / moment
    return (TWO_PI * shake_m / length) ** 2 / 2.0
