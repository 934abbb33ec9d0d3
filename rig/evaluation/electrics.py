"""What the electrical and carriage channels tell of a level: shake amplitude and winding temperature."""

from __future__ import annotations

import math

import numpy as np

from analysis.flap import unwrap_crank
from rig.description import RigDescription
from rig.evaluation.stream import RowStore
from rig.evaluation.window import FEWEST_ROWS, Window
from rig.results import Measured


def carriage_shake(part: Window, store: RowStore) -> Measured:
    """Amplitude of the carriage at the flap rate, m: least squares on cosine and sine of the crank phase."""
    height = store.values("carriage height", part.rows)
    if height is None or part.crank_rad is None or len(part) < FEWEST_ROWS:
        return Measured()
    phase = unwrap_crank(part.time_s, part.crank_rad)
    if abs(phase[-1] - phase[0]) < 4.0 * np.pi:
        return Measured()
    columns = np.column_stack([np.cos(phase), np.sin(phase), np.ones_like(phase), part.time_s])
    solution = np.linalg.lstsq(columns, height, rcond=None)[0]
    amplitude = float(np.hypot(solution[0], solution[1]))
    # Scatter between ten parts: the residual itself is no noise but higher harmonics of the shake.
    parts = []
    for rows in np.array_split(np.arange(len(phase)), 10):
        if len(rows) >= 8 and abs(phase[rows[-1]] - phase[rows[0]]) > 2.0 * np.pi:
            one = np.linalg.lstsq(columns[rows][:, :3], height[rows], rcond=None)[0]
            parts.append(float(np.hypot(one[0], one[1])))
    if len(parts) < 3:
        return Measured(amplitude)
    return Measured.normal(amplitude, float(np.std(parts, ddof=1) / math.sqrt(len(parts))))


def winding_temperature(part: Window, store: RowStore, rig: RigDescription) -> float | None:
    """Mean winding temperature, degC, from the resistance the motor shows: (V - back EMF) / I.

    Means are enough, for the equation is linear in them while the resistance changes slowly. None where
    the motor's constants are not known or the current is too small to tell.
    """
    mechanism = rig.mechanism
    needed = ("motor_resistance_ohm", "motor_constant_n_m_per_a", "gear_ratio")
    if mechanism is None or part.crank_rad is None or any(name in rig.unknown for name in needed):
        return None
    volts = store.values("motor voltage", part.rows)
    amps = store.values("motor current", part.rows)
    if volts is None or amps is None or len(part) < FEWEST_ROWS or abs(float(amps.mean())) < 0.2:
        return None
    phase = unwrap_crank(part.time_s, part.crank_rad)
    rate = abs(float(phase[-1] - phase[0])) / part.span_s
    back_emf = mechanism.motor_constant_n_m_per_a * mechanism.gear_ratio * rate
    resistance = (abs(float(volts.mean())) - back_emf) / abs(float(amps.mean()))
    relative = resistance / mechanism.motor_resistance_ohm - 1.0
    return 25.0 + relative / mechanism.copper_coefficient_per_k
