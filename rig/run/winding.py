"""Temperature of the motor's winding, estimated from its current: two bodies, winding and housing.

    Cw Tw' = i^2 R(Tw) - (Tw - Th) / Rwh        R = R25 (1 + a (Tw - 25))
    Ch Th' = (Tw - Th) / Rwh - (Th - Ta) / Rha

It never reads a simulated plant's true temperature: on a bench there is none to read. A motor of unknown
history is taken as hot until it has had time to cool.
"""

from __future__ import annotations

import math

from rig.description import MotorDescription

#: Where a motor of unknown history starts, as a share of the way from ambient to its limit.
HOT_SHARE = 0.6


class WindingModel:
    """Integrates exactly over one frame of constant heating."""

    def __init__(self, motor: MotorDescription, limit_deg_c: float, start_deg_c: float | None = None) -> None:
        self._motor = motor
        start = motor.start_deg_c if start_deg_c is None else start_deg_c
        if start is None:
            start = motor.ambient_deg_c + HOT_SHARE * (limit_deg_c - motor.ambient_deg_c)
        self.winding_deg_c = start
        self.housing_deg_c = start

    def add(self, mean_square_a2: float, duration_s: float) -> float:
        """Heat for `duration_s` with the mean square current in A^2; the winding's temperature after it."""
        motor = self._motor
        resistance = motor.resistance_ohm * (
            1.0 + motor.copper_coefficient_per_k * (self.winding_deg_c - 25.0)
        )
        across = (self.winding_deg_c - self.housing_deg_c) / motor.winding_housing_k_per_w
        # The winding relaxes towards the temperature at which the heat flows off; the housing is far slower.
        balance = self.housing_deg_c + mean_square_a2 * resistance * motor.winding_housing_k_per_w
        share = -math.expm1(-duration_s / (motor.winding_capacity_j_per_k * motor.winding_housing_k_per_w))
        off = (self.housing_deg_c - motor.ambient_deg_c) / motor.housing_ambient_k_per_w
        self.winding_deg_c += (balance - self.winding_deg_c) * share
        self.housing_deg_c += (across - off) * duration_s / motor.housing_capacity_j_per_k
        return self.winding_deg_c
