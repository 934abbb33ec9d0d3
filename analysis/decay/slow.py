"""The slow part of a fitted decay: what is drawn over the data."""

from __future__ import annotations

import numpy as np

from analysis.decay.result import DecayFit, FloatArray


def slow_model(fit: DecayFit) -> FloatArray:
    """Offset, drift and slow mode of a fit, without its crank harmonics, rad."""
    time = fit.time_s
    slow = fit.offset_rad + fit.drift_rad_per_s * time
    squared = fit.omega_squared
    if squared > 0.0:
        swing = fit.amplitude_rad * np.cos(np.sqrt(squared) * time + fit.phase_rad)
    else:
        # Two real poles: c1 and c2 follow from the angle and the angular rate at the start.
        rate = np.sqrt(max(-squared, 1e-12))
        first = _start_angle(fit)
        swing = (
            first * np.cosh(rate * time)
            + (fit.v0_rad_per_s + fit.decay_per_s * first) * np.sinh(rate * time) / rate
        )
    return np.asarray(slow + swing * np.exp(-fit.decay_per_s * time), dtype=np.float64)


def _start_angle(fit: DecayFit) -> float:
    # The fit keeps the size of the cosine part only; its sign is that of the model's first stretch.
    head = fit.model_rad[: max(len(fit.model_rad) // 20, 1)]
    return fit.amplitude_rad if float(np.mean(head)) >= fit.offset_rad else -fit.amplitude_rad
