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

from analysis.mechanism import equations as eq
from analysis.mechanism.packing import pack
from analysis.mechanism.parameters import Carriage, Mechanism

Vector = NDArray[np.float64]

#: Steps of a turn, more where the current of a slow crank's motor would not be resolved.
STEPS = 400
SECTION_RAD = -0.5 * math.pi
#: Differences for derivatives, per state: large against rounding, small against curvature.
SCALES = {eq.THETA: 1.0, eq.OMEGA: 10.0, eq.HEIGHT: 0.01, eq.CLIMB: 1.0, eq.RATE: 100.0, eq.CURRENT: 1.0}
DIFFERENCE = 1e-6


class Turn:
    """The turn map of one mechanism at one winding temperature. End stops take no part: they are moved away.

    `flap_hz` is roughly where it will be used; it sets the steps of a turn.
    """

    def __init__(self, mechanism: Mechanism, winding_deg_c: float, flap_hz: float) -> None:
        far = mechanism.with_(stop_low_rad=-1e3, stop_high_rad=1e3)
        self.parameters = pack(far)
        self.ohm = mechanism.motor_resistance_ohm * (
            1.0 + mechanism.copper_coefficient_per_k * (winding_deg_c - 25.0)
        )
        henry = float(self.parameters[eq.HENRY])
        self.steps = max(STEPS, math.ceil(self.ohm / henry / (1.2 * flap_hz))) if henry > 0.0 else STEPS
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
        time = float(eq.turn_crank(x, self.parameters, volts, self.ohm, 2.0 * math.pi, self.steps))
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
        part, steps = 2.0 * math.pi / points, math.ceil(self.steps / points)
        for _ in range(points):
            angles.append(x[eq.THETA])
            heights.append(x[eq.HEIGHT])
            time += float(eq.turn_crank(x, self.parameters, volts, self.ohm, part, steps))
        return float(np.mean(angles)), 0.5 * float(np.ptp(heights)), time
