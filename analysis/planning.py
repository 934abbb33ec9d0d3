"""What precision a tap will give: closed formulas for planning a dwell."""

from __future__ import annotations

import numpy as np
from scipy.integrate import quad


def decay_std(
    amplitude_rad: float, noise_rad: float, rate_hz: float, window_s: float, decay_per_s: float
) -> float:
    """Standard uncertainty (1/s) of the decay rate from one tap of the given amplitude in white noise.

    (n/A) sqrt(2/(fs D)), D = m2 - m1^2/m0, m_k = integral of t^k exp(-2 sigma t) over the window. Within
    1.00 to 1.10 of the bound from two cycles up; five to six times too small for one cycle with free drift.
    Raises ValueError for a size or rate that is not positive.
    """
    _positive(amplitude=amplitude_rad, rate=rate_hz, window=window_s)
    m0, m1, m2 = (moment(k, window_s, decay_per_s) for k in range(3))
    return noise_rad / amplitude_rad * float(np.sqrt(2.0 / (rate_hz * (m2 - m1**2 / m0))))


def moment(order: int, window_s: float, decay_per_s: float) -> float:
    """Integral of t^order exp(-2 sigma t) from 0 to the window's end."""
    return float(quad(lambda t: t**order * np.exp(-2.0 * decay_per_s * t), 0.0, window_s)[0])


def decay_std_slow(amplitude_rad: float, noise_rad: float, rate_hz: float, window_s: float) -> float:
    """Limit of `decay_std` for a decay that hardly shows in the window: (n/A) sqrt(24/(fs T^3))."""
    _positive(amplitude=amplitude_rad, rate=rate_hz, window=window_s)
    return noise_rad / amplitude_rad * float(np.sqrt(24.0 / (rate_hz * window_s**3)))


def decay_std_floor(amplitude_rad: float, noise_rad: float, rate_hz: float, decay_per_s: float) -> float:
    """Limit of `decay_std` for an endless window: (n/A) 4 sigma^1.5 / sqrt(fs)."""
    _positive(amplitude=amplitude_rad, rate=rate_hz, decay=decay_per_s)
    return noise_rad / amplitude_rad * 4.0 * decay_per_s**1.5 / float(np.sqrt(rate_hz))


def driven_decay_std(
    amplitude_rad: float, ambient_rms_rad: float, decay_per_s: float, window_s: float, total_s: float
) -> float:
    """Floor that random torque sets: 1/sqrt(A^2 (1 - exp(-2 sigma T))/(4 sigma^2 p^2) + T_total/sigma).

    ambient_rms_rad p: rms of the slow mode without taps; total_s: all record time at the level.
    """
    _positive(ambient=ambient_rms_rad, decay=decay_per_s, window=window_s)
    swing = amplitude_rad**2 * (1.0 - np.exp(-2.0 * decay_per_s * window_s))
    information = swing / (4.0 * decay_per_s**2 * ambient_rms_rad**2) + total_s / decay_per_s
    return float(1.0 / np.sqrt(information))


def planned_decay_std(
    amplitude_rad: float,
    noise_rad: float,
    rate_hz: float,
    window_s: float,
    decay_per_s: float,
    ambient_rms_rad: float = 0.0,
    total_s: float = 0.0,
) -> float:
    """Both limits of one tap added in squares, 1/s."""
    white = decay_std(amplitude_rad, noise_rad, rate_hz, window_s, decay_per_s)
    if ambient_rms_rad <= 0.0 or decay_per_s <= 0.0:
        return white
    return float(
        np.hypot(white, driven_decay_std(amplitude_rad, ambient_rms_rad, decay_per_s, window_s, total_s))
    )


def taps_for(half_width_per_s: float, single_std_per_s: float, factor: float = 1.959964) -> int:
    """Taps needed for a 95 % half-width of the mean decay rate, at least one."""
    _positive(half_width=half_width_per_s)
    return max(1, int(np.ceil((factor * single_std_per_s / half_width_per_s) ** 2 - 1e-9)))


def dwell_s(mode_hz: float, decay_per_s: float) -> float:
    """How long to watch after a tap: until sigma T = 3, two cycles or more, at most 20 s."""
    _positive(mode=mode_hz)
    wanted = 3.0 / decay_per_s if decay_per_s > 0.15 else 20.0
    return float(min(20.0, max(wanted, 2.0 / mode_hz)))


def _positive(**values: float) -> None:
    for name, value in values.items():
        if not value > 0.0:
            raise ValueError(f"{name.replace('_', ' ')} must be positive, not {value}")
