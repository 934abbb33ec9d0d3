"""What a decay fit returns."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
NAN = float("nan")
TWO_PI = 2.0 * np.pi
NORMAL_95 = 1.959964


@dataclass(frozen=True)
class SlowMode:
    """What is known of the slow mode, with 95 % limits; NaN where nothing is.

    decay_per_s sigma, positive when it decays; mode_hz damped frequency (0 when the poles are real);
    stiffness_per_s2 kappa = omega_d^2 + sigma^2 per unit inertia, negative when the body diverges.
    `status` in one word, `reason` in a sentence.
    """

    status: str
    reason: str = ""
    decay_per_s: float = NAN
    decay_std_per_s: float = NAN
    decay_low_per_s: float = NAN
    decay_high_per_s: float = NAN
    mode_hz: float = NAN
    mode_std_hz: float = NAN
    mode_low_hz: float = NAN
    mode_high_hz: float = NAN
    stiffness_per_s2: float = NAN
    stiffness_std_per_s2: float = NAN
    stiffness_low_per_s2: float = NAN
    stiffness_high_per_s2: float = NAN


@dataclass(frozen=True)
class DecayFit(SlowMode):
    """Decay of the slow mode in one record.

    amplitude_rad, phase_rad: A exp(-sigma t) cos(omega t + phase) at the start of the record;
    v0_rad_per_s: angular rate of the mode there. covariance (2, 2): of (sigma, omega_d^2).

    status: "ok"; "overdamped" (two real poles, both seen); "not_identifiable" (numbers given, but the record
    does not pin down a second-order mode: one real pole, or less than it takes to tell decay from drift);
    "no_signal" (no free swing above the noise); "contact" (a sample lies on an end stop); "too_short".
    The last three carry no decay rate: NaN. `reason` says it in words; `remarks` are doubts that do not stop
    a fit ("two_modes", "amplitude_dependent", "friction_like").
    interval: which noise model set the width: "white", "robust" or "driven".
    """

    amplitude_rad: float = NAN
    phase_rad: float = NAN
    v0_rad_per_s: float = NAN
    v0_std_rad_per_s: float = NAN
    offset_rad: float = NAN
    drift_rad_per_s: float = NAN
    ambient_rms_rad: float = NAN
    residual_rms_rad: float = NAN
    n_samples: int = 0
    interval: str = "white"
    remarks: tuple[str, ...] = ()
    covariance: FloatArray = field(default_factory=lambda: np.full((2, 2), NAN))
    time_s: FloatArray = field(default_factory=lambda: np.zeros(0))
    model_rad: FloatArray = field(default_factory=lambda: np.zeros(0))
    residual_rad: FloatArray = field(default_factory=lambda: np.zeros(0))

    @property
    def omega_squared(self) -> float:
        """omega_d^2 in 1/s^2, negative for two real poles."""
        return self.stiffness_per_s2 - self.decay_per_s**2

    @property
    def damping_ratio(self) -> float:
        """sigma / sqrt(kappa); NaN where the stiffness is not positive."""
        return (
            self.decay_per_s / float(np.sqrt(self.stiffness_per_s2)) if self.stiffness_per_s2 > 0.0 else NAN
        )

    def limits(self, factor: float) -> tuple[float, float]:
        """Decay rate minus and plus `factor` standard uncertainties, 1/s."""
        half = factor * self.decay_std_per_s
        return self.decay_per_s - half, self.decay_per_s + half


def mode_frequency(q: float, q_std: float) -> tuple[float, float, float, float]:
    """Damped frequency in Hz with std, low, high from omega_d^2 and its std; 0 where the poles are real."""
    low, high = (float(np.sqrt(max(q + sign * NORMAL_95 * q_std, 0.0))) / TWO_PI for sign in (-1.0, 1.0))
    value = float(np.sqrt(max(q, 0.0))) / TWO_PI
    std = q_std / (2.0 * np.sqrt(q)) / TWO_PI if q > q_std else (high - low) / (2.0 * NORMAL_95)
    return value, float(std), low, high


def stiffness_std(sigma: float, covariance: FloatArray) -> float:
    """Standard uncertainty of q + sigma^2."""
    slope = np.array([2.0 * sigma, 1.0])
    return float(np.sqrt(max(slope @ covariance @ slope, 0.0)))
