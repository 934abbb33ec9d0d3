"""Periodic orbits of the whole mechanism, and the slow mode from their multipliers.

References: any text on periodic orbits and Floquet theory; continuation with the section angle as parameter
passes a fold where the drive does not, as in R. Seydel, Practical Bifurcation and Stability Analysis (from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analysis.floquet.turn import Turn
from analysis.mechanism import equations as eq

Vector = NDArray[np.float64]

NEWTON_STEPS = 25
CLOSE = 1e-9


@dataclass(frozen=True)
class Orbit:
    """A periodic orbit: its state on the section, the drive, the time of a turn.

    `drive_slope`, V/rad, where the orbit was found by its angle: change of drive along the branch.
    """

    state: Vector
    drive_v: float
    turn_s: float
    drive_slope: float = math.nan

    @property
    def flap_hz(self) -> float:
        return 1.0 / self.turn_s


@dataclass(frozen=True)
class SlowMode:
    """The body's slow mode of an orbit: poles -sigma +- sqrt(-q); kappa = q + sigma^2 = p1 p2."""

    decay_per_s: float
    omega_squared_per_s2: float

    @property
    def stiffness_per_s2(self) -> float:
        return self.omega_squared_per_s2 + self.decay_per_s**2

    @property
    def mode_hz(self) -> float:
        """Damped frequency; 0 for two real poles."""
        return math.sqrt(max(self.omega_squared_per_s2, 0.0)) / (2.0 * math.pi)


def at_drive(turn: Turn, guess: Vector, drive_v: float) -> Orbit | None:
    """The orbit near `guess` at a given drive; None if Newton's method does not find one."""
    z = guess.copy()
    for _ in range(NEWTON_STEPS):
        after, time = turn.map(z, drive_v)
        left = after - z
        if not np.all(np.isfinite(left)):
            return None
        if float(np.max(np.abs(left / turn.scale))) < CLOSE:
            return Orbit(z, drive_v, time)
        slopes, _ = turn.slopes(z, drive_v)
        try:
            step = np.linalg.solve(slopes - np.eye(turn.size), -left)
        except np.linalg.LinAlgError:
            return None
        z = z + step * min(1.0, 0.3 / max(float(np.max(np.abs(step / turn.scale))), 1e-12))
    return None


def at_angle(turn: Turn, guess: Vector, drive_v: float, angle_rad: float) -> Orbit | None:
    """The orbit whose body stands at `angle_rad` on the section; its drive is part of the answer."""
    z = guess.copy()
    z[0] = angle_rad
    for _ in range(NEWTON_STEPS):
        after, time = turn.map(z, drive_v)
        left = after - z
        if not np.all(np.isfinite(left)):
            return None
        slopes, by_volts = turn.slopes(z, drive_v)
        matrix = slopes - np.eye(turn.size)
        by_angle = matrix[:, 0].copy()
        matrix[:, 0] = by_volts  # the angle is given, the drive is free
        try:
            step, along = np.linalg.solve(matrix, -np.column_stack([left, by_angle])).T
        except np.linalg.LinAlgError:
            return None
        if float(np.max(np.abs(left / turn.scale))) < CLOSE:
            return Orbit(z, drive_v, time, float(along[0]))
        scaled = step / turn.scale
        scaled[0] = step[0]
        step = step * min(1.0, 0.3 / max(float(np.max(np.abs(scaled))), 1e-12))
        drive_v += float(step[0])
        z = z + np.concatenate(([0.0], step[1:]))
    return None


def slow_mode(turn: Turn, orbit: Orbit) -> SlowMode:
    """The pair of multipliers whose motion is most of all the body's own.

    Every state is scaled before the eigenvectors are compared; a crank or carriage mode moves the body too, but
    less than it moves what it belongs to.
    """
    slopes, _ = turn.slopes(orbit.state, orbit.drive_v)
    scaled = slopes / turn.scale[:, None] * turn.scale[None, :]
    values, vectors = np.linalg.eig(scaled)
    body = np.linalg.norm(vectors[:2], axis=0) / np.linalg.norm(vectors, axis=0)
    first = int(np.argmax(body))
    if abs(values[first].imag) > 1e-12:
        pole = np.log(values[first]) / orbit.turn_s
        return SlowMode(-float(pole.real), float(pole.imag) ** 2)
    # Two real poles: the body's other one is the next most its own among the real multipliers.
    others = [
        j for j in range(len(values)) if j != first and abs(values[j].imag) < 1e-12 and values[j].real > 0.0
    ]
    second = max(others, key=lambda j: body[j])
    poles = [math.log(max(float(values[j].real), 1e-300)) / orbit.turn_s for j in (first, second)]
    sigma = -0.5 * sum(poles)
    return SlowMode(sigma, -((0.5 * (poles[0] - poles[1])) ** 2))


def first_guess(turn: Turn, angle_rad: float, flap_hz: float, height_m: float, current_a: float) -> Vector:
    """A state on the section from averaged values; the shuttle at its lowest lifts the carriage most."""
    z = np.zeros(turn.size)
    for place, state in enumerate(turn.states):
        if state == eq.THETA:
            z[place] = angle_rad
        elif state == eq.HEIGHT:
            z[place] = height_m
        elif state == eq.RATE:
            z[place] = 2.0 * math.pi * flap_hz
        elif state == eq.CURRENT:
            z[place] = current_a
    return z
