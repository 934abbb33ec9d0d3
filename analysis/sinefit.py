"""Frequency of a sine in noise, and crank phase recovered from a signal the crank leaves its mark on."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class SineFit:
    """One sine: amplitude * cos(2 pi f t + phase) + offset, t from the first sample.

    status: "ok", "no_signal" (not above the noise), "too_short" (less than two periods).
    """

    frequency_hz: float
    frequency_std_hz: float
    amplitude: float
    phase_rad: float
    offset: float
    residual_rms: float
    iterations: int
    status: str = "ok"


def coarse_frequency(time_s: ArrayLike, signal: ArrayLike, *, above_hz: float = 0.0) -> float:
    """Frequency (Hz) of the strongest line from two neighbouring bins of a Hann-windowed spectrum.

    Interpolation after Grandke, IEEE Trans. Instrum. Meas. 32 (1983) 350: with a the ratio of the larger
    neighbour to the peak, the line lies (2a - 1)/(a + 1) bins from the peak towards that neighbour.
    """
    time, values = np.asarray(time_s, dtype=float), np.asarray(signal, dtype=float)
    step = (time[-1] - time[0]) / (len(time) - 1)
    even = np.interp(time[0] + step * np.arange(len(time)), time, values)
    spectrum = np.abs(np.fft.rfft((even - even.mean()) * np.hanning(len(even) + 1)[:-1]))
    lowest = max(2, int(np.ceil(above_hz * step * len(even))))
    if lowest >= len(spectrum) - 1:
        return float("nan")
    peak = lowest + int(np.argmax(spectrum[lowest:-1]))
    left, right = spectrum[peak - 1], spectrum[peak + 1]
    ratio = max(left, right) / spectrum[peak] if spectrum[peak] > 0.0 else 0.0
    shift = float(np.clip((2.0 * ratio - 1.0) / (ratio + 1.0), -1.0, 1.0))
    return float((peak + (shift if right >= left else -shift)) / (step * len(even)))


def fit_sine(time_s: ArrayLike, signal: ArrayLike, *, above_hz: float = 0.0) -> SineFit:
    """Four-parameter sine fit: amplitude, phase, offset and frequency by least squares.

    IEEE Std 1057, four-parameter algorithm: columns cos, sin, 1 and -A t sin + B t cos, repeated until the
    frequency stands. Attains the bound for one constant frequency; if the frequency wanders it returns a
    mean weighted to the ends of the window, and no bound for a constant frequency applies.
    Raises ValueError for fewer than 8 samples or arrays of unequal length.
    """
    time, values = np.asarray(time_s, dtype=float), np.asarray(signal, dtype=float)
    if time.ndim != 1 or time.shape != values.shape or len(time) < 8:
        raise ValueError("a sine fit needs two one-dimensional arrays of equal length, 8 samples or more")
    local = time - time[0]
    frequency = coarse_frequency(time, values, above_hz=above_hz)
    if not np.isfinite(frequency):
        return SineFit(float("nan"), float("nan"), 0.0, 0.0, float(values.mean()), float(values.std()), 0,
                       "no_signal")  # fmt: skip
    scale = 1.0 / local[-1]
    inphase, quadrature = _three(local, values, frequency)
    iterations = 0
    solution = np.zeros(4)
    while iterations < 30:
        iterations += 1
        angle = 2.0 * np.pi * frequency * local
        cosine, sine = np.cos(angle), np.sin(angle)
        slope = 2.0 * np.pi * scale * local * (quadrature * cosine - inphase * sine)
        columns = np.column_stack((cosine, sine, np.ones_like(local), slope))
        solution = np.linalg.lstsq(columns, values, rcond=None)[0]
        inphase, quadrature = float(solution[0]), float(solution[1])
        step = float(np.clip(solution[3], -0.5, 0.5)) * scale
        frequency += step
        if abs(step) < 1e-10 * max(frequency, scale):
            break
    residual = values - columns @ solution
    dof = max(len(values) - 4, 1)
    variance = float(residual @ residual) / dof
    amplitude = float(np.hypot(inphase, quadrature))
    try:
        covariance = np.linalg.inv(columns.T @ columns)
        std = float(np.sqrt(variance * max(covariance[3, 3], 0.0))) * scale
    except np.linalg.LinAlgError:
        std = float("nan")
    status = "ok"
    if frequency * local[-1] < 2.0:
        status = "too_short"
    elif amplitude**2 * len(values) / 4.0 < variance * (np.log(len(values)) + 4.6):
        status = "no_signal"  # a peak this high happens in white noise once in a hundred windows
    return SineFit(frequency, std, amplitude, float(np.arctan2(-quadrature, inphase)), float(solution[2]),
                   float(np.sqrt(variance)), iterations, status)  # fmt: skip


def crank_from_signal(
    time_s: ArrayLike, signal: ArrayLike, *, above_hz: float = 6.0, bandwidth_hz: float = 3.0
) -> FloatArray | None:
    """Crank phase (rad) seen in a signal that carries the flap frequency, or None where it is not seen.

    The flap line is brought to zero frequency and smoothed over `bandwidth_hz`; its phase follows the wander
    of the crank. Up to a constant; a poor substitute for a crank encoder (9 times its error).
    """
    time, values = np.asarray(time_s, dtype=float), np.asarray(signal, dtype=float)
    if len(time) < 32:
        return None
    smooth = _smoothed(time, values, 0.5 * above_hz)
    line = fit_sine(time, values - smooth, above_hz=above_hz)
    if line.status != "ok":
        return None
    carrier = 2.0 * np.pi * line.frequency_hz * (time - time[0])
    base = _smoothed(
        time, (values - smooth) * np.exp(-1j * carrier), min(bandwidth_hz, 0.3 * line.frequency_hz)
    )
    angle: FloatArray = np.angle(np.asarray(base, dtype=np.complex128))
    return np.asarray(carrier + np.unwrap(angle))


def _three(local: FloatArray, values: FloatArray, frequency: float) -> tuple[float, float]:
    angle = 2.0 * np.pi * frequency * local
    columns = np.column_stack((np.cos(angle), np.sin(angle), np.ones_like(local)))
    solution = np.linalg.lstsq(columns, values, rcond=None)[0]
    return float(solution[0]), float(solution[1])


def _smoothed(time: FloatArray, values: NDArray[np.generic], cutoff_hz: float) -> NDArray[np.generic]:
    from scipy.ndimage import gaussian_filter1d

    step = (time[-1] - time[0]) / (len(time) - 1)
    width = 0.1325 / (cutoff_hz * step)  # half power at the cut-off
    if np.iscomplexobj(values):
        real = gaussian_filter1d(np.real(values), width, mode="reflect")
        return np.asarray(real + 1j * gaussian_filter1d(np.imag(values), width, mode="reflect"))
    return np.asarray(gaussian_filter1d(np.asarray(values, dtype=float), width, mode="reflect"))
