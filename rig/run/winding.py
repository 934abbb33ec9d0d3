"""Temperature of the motor's winding, estimated from its current: two bodies, winding and housing.

    Cw Tw' = i^2 R(Tw) - (Tw - Th) / Rwh        R = R25 (1 + a (Tw - 25))
    Ch Th' = (Tw - Th) / Rwh - (Th - Ta) / Rha

It never reads a simulated plant's true temperature: on a bench there is none to read. A motor of unknown
history is taken as hot until it has had time to cool; a known history outlives the program as a small file.
"""

from __future__ import annotations

import json
import math
from dataclasses import asdict, dataclass
from pathlib import Path

from rig.description import MotorDescription

#: Where a motor of unknown history starts, as a share of the way from ambient to its limit.
HOT_SHARE = 0.6
COOLING_STEP_S = 1.0


@dataclass(frozen=True)
class WindingState:
    """Temperatures in degC at a time in s since the epoch (UTC)."""

    winding_deg_c: float
    housing_deg_c: float
    utc_s: float

    def write(self, path: Path) -> None:
        """Write it down, aside first: a torn file would be a motor of unknown history."""
        aside = path.with_name(f".{path.name}.part")
        aside.write_text(json.dumps(asdict(self)), encoding="utf-8")
        aside.replace(path)


def read_state(path: Path) -> WindingState | None:
    """The state written last; None if there is none or it cannot be read, which means: hot."""
    try:
        fields = json.loads(path.read_text(encoding="utf-8"))
        numbers = [float(fields[name]) for name in ("winding_deg_c", "housing_deg_c", "utc_s")]
    except (OSError, ValueError, KeyError, TypeError):
        return None
    return WindingState(*numbers) if all(math.isfinite(number) for number in numbers) else None


class WindingModel:
    """Integrates exactly over one frame of constant heating."""

    def __init__(self, motor: MotorDescription, limit_deg_c: float, start_deg_c: float | None = None) -> None:
        self._motor = motor
        start = motor.start_deg_c if start_deg_c is None else start_deg_c
        if start is None:
            start = motor.ambient_deg_c + HOT_SHARE * (limit_deg_c - motor.ambient_deg_c)
        self.winding_deg_c = start
        self.housing_deg_c = start

    def resume(self, state: WindingState, utc_s: float) -> None:
        """Go on from a state left behind, cooled without current ever since.

        A clock set back, or a state from the future, cools nothing.
        """
        self.winding_deg_c, self.housing_deg_c = state.winding_deg_c, state.housing_deg_c
        motor = self._motor
        longest = 20.0 * motor.housing_capacity_j_per_k * motor.housing_ambient_k_per_w
        left_s = min(max(utc_s - state.utc_s, 0.0), longest)
        while left_s > 0.0:
            self.add(0.0, min(left_s, COOLING_STEP_S))
            left_s -= COOLING_STEP_S

    def state(self, utc_s: float) -> WindingState:
        return WindingState(self.winding_deg_c, self.housing_deg_c, utc_s)

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
