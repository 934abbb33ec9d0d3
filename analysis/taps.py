"""Taps in the body angle: when they struck, how large the step of angular rate was, and double hits."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analysis.decay.record import TapRecord, checked
from analysis.decay.result import DecayFit

FloatArray = NDArray[np.float64]
DETECT_HALF_S = 0.15
TIME_HALF_S = 0.10
STEP_S = 0.005


@dataclass(frozen=True)
class Tap:
    """One tap: onset in s (on the clock of the record) and kick, the step of angular rate in rad/s.

    score: likelihood ratio (a squared signal-to-noise ratio). hits: 2 or more when it struck again within
    0.25 s. status: "ok" or "not_seen".
    """

    onset_s: float
    onset_std_s: float
    kick_rad_per_s: float
    kick_std_rad_per_s: float
    score: float
    hits: int = 1
    status: str = "ok"


def find_taps(
    time_s: ArrayLike,
    angle_rad: ArrayLike,
    crank_rad: ArrayLike | None = None,
    *,
    false_alarms_per_hour: float = 1.0,
    dead_s: float = 0.6,
) -> tuple[Tap, ...]:
    """Taps nobody announced, oldest first.

    Joint local regression: cubic, two crank harmonics and a hinge (t - t0)+ over +-150 ms, likelihood ratio
    of the hinge against the noise of the same window; timed as in `refine_tap`. Within `dead_s` of a tap only
    second hits are looked for: the free swing itself bends. A swing faster than about 2 Hz and larger than
    2 deg already in the record can bend enough to be taken for a tap.
    Raises ValueError for malformed arrays.
    """
    record = checked(time_s, angle_rad, crank_rad)
    zero = float(np.asarray(time_s, dtype=float)[0]) if len(record.time_s) else 0.0
    threshold = alarm_threshold(false_alarms_per_hour)
    centres, scores, _ = scan(record, DETECT_HALF_S, 3, STEP_S)
    found: list[Tap] = []
    free_from = -np.inf
    while True:
        usable = (centres >= free_from) & (scores > threshold)
        if not usable.any():
            return tuple(found)
        first = int(np.argmax(usable))
        near = (centres >= centres[first]) & (centres <= centres[first] + 0.12)
        peak = centres[near][np.argmax(scores[near])]
        tap = _timed(record, float(peak), (-0.04, 0.04), zero)
        if tap.status == "ok":
            found.append(tap)
        free_from = float(peak) + dead_s


def refine_tap(
    time_s: ArrayLike,
    angle_rad: ArrayLike,
    crank_rad: ArrayLike | None,
    commanded_s: float,
    *,
    search_s: tuple[float, float] = (-0.01, 0.06),
) -> Tap:
    """Onset and kick of a tap commanded at `commanded_s`, looked for from search_s[0] to search_s[1] around it.

    Quadratic, two crank harmonics and a hinge over +-100 ms at every millisecond; the onset is where the
    hinge explains most. A pulse of finite length is timed at its middle.
    Raises ValueError when the record does not reach 50 ms to both sides of the search.
    """
    record = checked(time_s, angle_rad, crank_rad)
    zero = float(np.asarray(time_s, dtype=float)[0])
    centre = commanded_s - zero
    if centre + search_s[0] < 0.05 or centre + search_s[1] > record.time_s[-1] - 0.05:
        raise ValueError("the record must reach 50 ms beyond the search on both sides")
    return _timed(record, centre, search_s, zero)


def kick_from_fit(fit: DecayFit, before_start_s: float) -> float:
    """Angular rate (rad/s) of the fitted free swing at the tap, `before_start_s` before the fitted record.

    Much sharper than the local hinge (which reads 6 to 10 % high): use it where there is a decay fit.
    """
    q, sigma = fit.omega_squared, fit.decay_per_s
    if not np.isfinite(q) or q <= 0.0:
        return float("nan")
    omega = float(np.sqrt(q))
    t = -before_start_s
    angle = omega * t + fit.phase_rad
    swing = fit.amplitude_rad * np.exp(-sigma * t)
    return float(swing * (-sigma * np.cos(angle) - omega * np.sin(angle)))


def alarm_threshold(per_hour: float) -> float:
    """Likelihood ratio that noise passes `per_hour` times in an hour; looks are independent every 50 ms."""
    from scipy.special import chdtri

    if not per_hour > 0.0:
        raise ValueError("the number of false alarms must be positive")
    return float(chdtri(1.0, min(per_hour * 0.05 / 3600.0, 0.5)) * 1.3)


def scan(
    record: TapRecord,
    half_s: float,
    degree: int,
    step_s: float,
    lowest: float | None = None,
    top: float | None = None,
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Hinge likelihood ratio on a grid of onsets: (onset in s, ratio, step of angular rate in rad/s)."""
    time = record.time_s
    if len(time) < 40 or time[-1] < half_s:
        return np.zeros(0), np.zeros(0), np.zeros(0)
    start = 0.4 * half_s if lowest is None else lowest
    stop = time[-1] - 0.4 * half_s if top is None else top
    centres = np.arange(start, stop + 0.5 * step_s, step_s)
    ratios, kicks = np.zeros(len(centres)), np.zeros(len(centres))
    for i, centre in enumerate(centres):
        low, high = np.searchsorted(time, (centre - half_s, centre + half_s))
        ratios[i], kicks[i], _ = hinge(record, slice(int(low), int(high)), centre, degree, half_s)
    return centres, ratios, kicks


def hinge(
    record: TapRecord, part: slice, centre: float, degree: int, half_s: float, extra: FloatArray | None = None
) -> tuple[float, float, float]:
    """Likelihood ratio, step of angular rate and its std for one onset, everything smooth projected off."""
    local = (record.time_s[part] - centre) / half_s
    if len(local) < degree + 12 or local[0] > -0.2 or local[-1] < 0.2:
        return 0.0, 0.0, np.inf
    rows = [local**k for k in range(degree + 1)]
    if record.crank_rad is not None:
        for order in (1, 2):
            rows += [np.cos(order * record.crank_rad[part]), np.sin(order * record.crank_rad[part])]
    if extra is not None:
        rows.append(extra)
    bend = np.maximum(local, 0.0)
    q, _ = np.linalg.qr(np.array(rows).T)
    data = record.angle_rad[part]
    data = data - q @ (q.T @ data)
    bend = bend - q @ (q.T @ bend)
    size = float(bend @ bend)
    if size <= 0.0:
        return 0.0, 0.0, np.inf
    along = float(bend @ data)
    rest = float(data @ data) - along**2 / size
    variance = max(rest, 1e-300) / max(len(local) - len(rows) - 1, 1)
    return along**2 / size / variance, along / size / half_s, float(np.sqrt(variance / size)) / half_s


def _timed(record: TapRecord, centre: float, search_s: tuple[float, float], zero: float) -> Tap:
    onsets, ratios, _ = scan(record, TIME_HALF_S, 2, 0.001, centre + search_s[0], centre + search_s[1])
    if len(ratios) == 0 or ratios.max() < 12.0:
        return Tap(
            zero + centre, float("nan"), 0.0, float("nan"), float(ratios.max(initial=0.0)), 0, "not_seen"
        )
    best = int(np.argmax(ratios))
    onset = float(onsets[best])
    low, high = np.searchsorted(record.time_s, (onset - TIME_HALF_S, onset + TIME_HALF_S))
    part = slice(int(low), int(high))
    ratio, kick, kick_std = hinge(record, part, onset, 2, TIME_HALF_S)
    # Residual sum of squares in units of its variance: it rises by one at one standard uncertainty.
    explained = ratios * (1.0 + ratios.max() / (high - low)) / (1.0 + ratios / (high - low))
    inside = explained > explained[best] - 4.0
    std = max(0.5 * float(np.ptp(onsets[inside])) / 2.0, 0.0005)
    hits = 1 + _second_hits(record, onset, kick)
    return Tap(zero + onset, std, kick, kick_std, ratio, hits)


def _second_hits(record: TapRecord, onset: float, kick: float) -> int:
    """Further hinges 40 to 250 ms after the first, at least a quarter of its size and clear of noise."""
    time = record.time_s
    low, high = np.searchsorted(time, (onset - TIME_HALF_S, onset + 0.35))
    part = slice(int(low), int(high))
    first = np.maximum(time[part] - onset, 0.0)
    best, size = 0.0, 0.0
    for later in np.arange(onset + 0.04, min(onset + 0.25, time[-1] - 0.06), 0.005):
        ratio, step, _ = hinge(record, part, float(later), 5, 0.2, first)
        if ratio > best:
            best, size = ratio, step
    return int(best > 60.0 and abs(size) > 0.25 * abs(kick))
