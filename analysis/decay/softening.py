"""Slow mode at vanishing amplitude: the same likelihood with a restoring torque that bends.

    theta'' + 2 sigma theta' + kappa theta + a theta^2 + b theta^3 = 0

A swing A exp(-sigma t) then turns faster or slower with its square, omega^2 = q + beta A^2 exp(-2 sigma t), and
carries a shift and a second harmonic of a A^2 / (2 kappa) (Lindstedt; Landau & Lifshitz, Mechanics, section 28).
Fitted without these, a tap of a few degrees near a fold reads percents of stiffness too low.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from analysis.decay.driven import Likelihood, Series
from analysis.decay.model import mode_columns

FloatArray = NDArray[np.float64]
# Prior widths of beta/kappa (1/rad^2) and a/kappa (1/rad). A pendulum has 0.4 and less; 1 % above a fold they
# reach 20 and 7. Where the taps are too small to tell, these widths times the amplitude squared stay in the interval.
BETA = 8.0
SQUARE = 6.0


class BendingLikelihood(Likelihood):
    """`Likelihood` with two more parameters, beta and a, both over kappa and in units of their priors.

    swings: amplitude (rad) and phase (rad) at the start of each tapped record, from its own fit.
    """

    def __init__(
        self,
        series: Sequence[Series],
        sigma: float,
        q: float,
        scale: tuple[float, float],
        swings: Sequence[tuple[float, float]],
    ) -> None:
        super().__init__(series, sigma, q, scale)
        self.swings = swings
        self.data = [rows[0].copy() for rows in self.rows]
        self.centre = np.append(self.centre, [0.0, 0.0])
        self.width = np.append(self.width, [1.0, 1.0])

    def softening(self, z: FloatArray) -> float:
        """Relative change of stiffness with the square of the amplitude, 1/rad^2."""
        return BETA * float(z[5])

    def swing(self, index: int, sigma: float, q: float, z: FloatArray) -> None:
        if q <= 0.01:
            # Two real poles do not swing: nothing to bend.
            self.rows[index][0] = self.data[index]
            super().swing(index, sigma, q, z)
            return
        time = self.series[index].time_s
        amplitude, phase = self.swings[index]
        omega, kappa = float(np.sqrt(q)), q + sigma**2
        # Integral of exp(-2 sigma t), finite through sigma = 0.
        columns = self.columns[index]
        mode_columns(time, 2.0 * sigma, 0.0, columns)
        fading = columns[0]
        area = (1.0 - fading) / (2.0 * sigma) if abs(sigma) > 1e-6 else time
        angle = omega * time + BETA * z[5] * kappa * amplitude**2 / (2.0 * omega) * area
        envelope = np.exp(-sigma * time)
        rows = self.rows[index]
        rows[3] = envelope * np.cos(angle)
        rows[4] = envelope * np.sin(angle) / omega
        bend = 0.5 * SQUARE * z[6] * amplitude**2 * fading
        rows[0] = self.data[index] - bend * (np.cos(2.0 * (angle + phase)) / 3.0 - 1.0)
