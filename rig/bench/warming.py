"""Compile and load everything the analysis of a tap needs before a motor is armed, never in the middle of a run."""

from __future__ import annotations

import numpy as np

from analysis.decay import fit_decay, fit_level
from analysis.decay.record import TapRecord
from analysis.flap import mean_flap

ROWS_PER_S = 500.0
SEED = 7


def warm_up() -> None:
    """Fit an invented tap once, with and without a quiet record."""
    random = np.random.default_rng(SEED)
    time_s = np.arange(0.0, 3.0, 1.0 / ROWS_PER_S)
    crank_rad = 2.0 * np.pi * 25.0 * time_s
    swing = 0.05 * np.exp(-0.8 * time_s) * np.cos(2.0 * np.pi * 1.1 * time_s)
    noise = 1e-4 * random.standard_normal(len(time_s))
    angle_rad = swing + 0.01 * np.cos(crank_rad) + noise
    quiet_rad = 0.01 * np.cos(crank_rad) + 1e-4 * random.standard_normal(len(time_s))
    quiet = TapRecord(time_s, quiet_rad, crank_rad)
    fit_decay(time_s, angle_rad, crank_rad)
    fit_decay(time_s, angle_rad, crank_rad, quiet=quiet)
    fit_level([TapRecord(time_s, angle_rad, crank_rad)] * 2, quiet)
    mean_flap(time_s, crank_rad)
