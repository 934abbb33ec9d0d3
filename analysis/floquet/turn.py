"""One turn of the crank: the state after it from the state before, with the crank angle as independent variable.

With psi instead of time every turn takes the same steps, so the map is smooth in the state and in the drive and
can be differentiated by differences. States on the section (psi = -90 deg): those that move in the carriage mode,

    floating: theta, omega, y, v, Omega, i        geared, clamped: theta, omega, Omega, i

(without i for a motor so quick that its current follows at once).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from analysis.kernel import kernel
from analysis.mechanism import equations as eq
from analysis.mechanism.packing import pack
from analysis.mechanism.parameters import Carriage, Mechanism

Vector = NDArray[np.float64]

STEPS = 400
SECTION_RAD = -0.5 * math.pi
#: Differences for derivatives, per state: large against rounding, small against curvature.
SCALES = {eq.THETA: 1.0, eq.OMEGA: 10.0, eq.HEIGHT: 0.01, eq.CLIMB: 1.0, eq.RATE: 100.0, eq.CURRENT: 1.0}
DIFFERENCE = 1e-6


@kernel(error_model="numpy")
def _turn(x, p, volts, ohm, steps):  # type: ignore[no-untyped-def]
    """Advance the state `x` by one crank turn with RK4 in the crank angle; returns the time it took."""
    n = eq.MOTION
    k1, k2, k3, k4 = np.zeros(n), np.zeros(n), np.zeros(n), np.zeros(n)
    y = np.zeros(n)
    h = 2.0 * math.pi / steps
    time = 0.0
    for _ in range(steps):
        eq.rates(x, p, n, eq.DRIVEN, volts, ohm, 0.0, False, 0.0, k1)
        d1 = 1.0 / x[eq.RATE]
        for j in range(n):
            y[j] = x[j] + 0.5 * h * k1[j] * d1
        eq.rates(y, p, n, eq.DRIVEN, volts, ohm, 0.0, False, 0.0, k2)
        d2 = 1.0 / y[eq.RATE]
        for j in range(n):
            y[j] = x[j] + 0.5 * h * k2[j] * d2
        eq.rates(y, p, n, eq.DRIVEN, volts, ohm, 0.0, False, 0.0, k3)
        d3 = 1.0 / y[eq.RATE]
        for j in range(n):
            y[j] = x[j] + h * k3[j] * d3
        eq.rates(y, p, n, eq.DRIVEN, volts, ohm, 0.0, False, 0.0, k4)
        d4 = 1.0 / y[eq.RATE]
        for j in range(n):
            x[j] += h / 6.0 * (k1[j] * d1 + 2.0 * k2[j] * d2 + 2.0 * k3[j] * d3 + k4[j] * d4)
        time += h / 6.0 * (d1 + 2.0 * d2 + 2.0 * d3 + d4)
    return time


class Turn:
    """The turn map of one mechanism at one winding temperature. End stops take no part: they are moved away."""

    def __init__(self, mechanism: Mechanism, winding_deg_c: float = 25.0) -> None:
        far = mechanism.with_(stop_low_rad=-1e3, stop_high_rad=1e3)
        self.parameters = pack(far)
        self.ohm = mechanism.motor_resistance_ohm * (
            1.0 + mechanism.copper_coefficient_per_k * (winding_deg_c - 25.0)
        )
        states = [eq.THETA, eq.OMEGA]
        if mechanism.carriage is Carriage.FLOATING:
            states += [eq.HEIGHT, eq.CLIMB]
        states.append(eq.RATE)
        if self.parameters[eq.HENRY] > 0.0:
            states.append(eq.CURRENT)
        self.states = states
        self.scale = np.array([SCALES[state] for state in states])

    @property
    def size(self) -> int:
        return len(self.states)

    def map(self, z: Vector, volts: float) -> tuple[Vector, float]:
        """State after one turn and the time it took, s. NaN where the crank would stop."""
        x = np.zeros(eq.RECORD)
        x[self.states] = z
        x[eq.CRANK] = SECTION_RAD
        time = float(_turn(x, self.parameters, volts, self.ohm, STEPS))
        return x[self.states], time

    def slopes(self, z: Vector, volts: float) -> tuple[Vector, Vector]:
        """Derivatives of the map by the state (n, n) and by the drive voltage (n,), central differences."""
        columns = []
        for j in range(self.size):
            step = np.zeros(self.size)
            step[j] = DIFFERENCE * self.scale[j]
            columns.append((self.map(z + step, volts)[0] - self.map(z - step, volts)[0]) / (2.0 * step[j]))
        by_volts = (self.map(z, volts + DIFFERENCE)[0] - self.map(z, volts - DIFFERENCE)[0]) / (
            2.0 * DIFFERENCE
        )
        return np.column_stack(columns), by_volts

    def mean_state(self, z: Vector, volts: float, points: int = 100) -> tuple[float, float, float]:
        """Mean body angle and the amplitude of the carriage over one turn from `z`, and the turn's time.

        Angle averaged over crank angle, rad; half the range of the carriage height, m.
        """
        x = np.zeros(eq.RECORD)
        x[self.states] = z
        x[eq.CRANK] = SECTION_RAD
        angles, heights, time = [], [], 0.0
        part = self.parameters
        for _ in range(points):
            angles.append(x[eq.THETA])
            heights.append(x[eq.HEIGHT])
            time += float(_part(x, part, volts, self.ohm, 4, 2.0 * math.pi / points))
        return float(np.mean(angles)), 0.5 * float(np.ptp(heights)), time


@kernel(error_model="numpy")
def _part(x, p, volts, ohm, steps, angle):  # type: ignore[no-untyped-def]
    """A part of a turn, by the midpoint rule: only for means."""
    n = eq.MOTION
    k, y = np.zeros(n), np.zeros(n)
    h = angle / steps
    time = 0.0
    for _ in range(steps):
        eq.rates(x, p, n, eq.DRIVEN, volts, ohm, 0.0, False, 0.0, k)
        for j in range(n):
            y[j] = x[j] + 0.5 * h * k[j] / x[eq.RATE]
        eq.rates(y, p, n, eq.DRIVEN, volts, ohm, 0.0, False, 0.0, k)
        for j in range(n):
            x[j] += h * k[j] / y[eq.RATE]
        time += h / y[eq.RATE]
    return time
