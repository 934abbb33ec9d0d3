"""What the body does over a window: held, at an end stop, bouncing, held by friction, or lost."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analysis.flap import turn_rate, unwrap_crank
from analysis.longrun import mean_variance
from analysis.position import turn_means

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]
DEG = np.pi / 180.0
STOP_MARGIN = 0.15 * DEG  # three counts of an 8192-count encoder


@dataclass(frozen=True)
class Contact:
    """Samples on the lower and upper end stop, boolean arrays of shape (n,)."""

    low: BoolArray
    high: BoolArray

    def any(self) -> bool:
        return bool(self.low.any() or self.high.any())

    @property
    def samples(self) -> int:
        return int(self.low.sum() + self.high.sum())

    @property
    def share(self) -> float:
        return self.samples / max(len(self.low), 1)


@dataclass(frozen=True)
class BodyState:
    """State of the body over a window: held, at_stop, bouncing, friction_held or lost, and why.

    settled: crank and body no longer drift and no ringing is left. contact_share: share of samples on a stop.
    mean_rad: mean angle over whole turns (plain mean without a crank).
    """

    state: str
    reason: str
    settled: bool
    mean_rad: float
    contact_share: float


@dataclass(frozen=True)
class Settling:
    """Whether a window is steady, and what moves if not."""

    settled: bool
    reason: str
    drift_rad_per_s: float
    ringing_rad: float


@dataclass(frozen=True)
class Return:
    """What became of a tap: outcome "returned", "lost" or "displaced", and why; lost_after_s from the tap."""

    outcome: str
    reason: str
    lost_after_s: float | None = None

    @property
    def returned(self) -> bool:
        return self.outcome == "returned"


def contact(angle_rad: ArrayLike, stops_rad: tuple[float, float], margin_rad: float = STOP_MARGIN) -> Contact:
    """Samples within `margin_rad` of an end stop, or beyond it; stops_rad = (low, high)."""
    low, high = stops_rad
    if not low < high:
        raise ValueError("the lower end stop must be below the upper one")
    angle = np.asarray(angle_rad, dtype=float)
    return Contact(angle <= low + margin_rad, angle >= high - margin_rad)


def assess(
    time_s: ArrayLike,
    angle_rad: ArrayLike,
    crank_rad: ArrayLike | None = None,
    *,
    stops_rad: tuple[float, float],
    rests_rad: Sequence[float] = (),
    resolution_rad: float = 2.0 * np.pi / 8192,
    margin_rad: float = STOP_MARGIN,
) -> BodyState:
    """State of the body over a window, 1 s or more.

    A window in which any sample touches a stop is never "held". Contact throughout with little motion is
    "at_stop"; contact that comes and goes, or both stops, is "bouncing", however steady it looks (a body
    thrown from stop to stop is periodic right where the slow mode lives); free at first and on a stop at the
    end is "lost". rests_rad: mean angles at which the body came to rest earlier at the same drive; resting
    somewhere else, standing still to one count between flaps, is "friction_held".
    Raises ValueError for arrays of unequal length or fewer than 8 samples.
    """
    time, angle = np.asarray(time_s, dtype=float), np.asarray(angle_rad, dtype=float)
    if time.shape != angle.shape or len(time) < 8:
        raise ValueError("time and angle must be of equal length, 8 samples or more")
    crank = None if crank_rad is None else np.asarray(crank_rad, dtype=float)
    touched = contact(angle, stops_rad, margin_rad)
    slow = slow_motion(time, angle, crank)
    mean = float(slow[1].mean()) if len(slow[1]) else float(angle.mean())
    if touched.any():
        state, reason = _in_contact(time, angle, touched)
        return BodyState(state, reason, state == "at_stop", mean, touched.share)
    settling = settled(time, angle, crank)
    if rests_rad and len(slow[1]) >= 4:
        away = min(abs(mean - rest) for rest in rests_rad)
        still = float(np.ptp(slow[1])) < 1.5 * resolution_rad
        if still and away > 8.0 * resolution_rad:
            reason = f"stands still {away / DEG:.2f} deg from where it rested before"
            return BodyState("friction_held", reason, settling.settled, mean, 0.0)
    reason = "free of both stops" if settling.settled else f"free of both stops, {settling.reason}"
    return BodyState("held", reason, settling.settled, mean, 0.0)


def slow_motion(
    time: FloatArray, angle: FloatArray, crank: FloatArray | None
) -> tuple[FloatArray, FloatArray]:
    """Body angle without the flap ripple: means over whole turns, or over 50 ms without a crank."""
    if crank is not None:
        turned = abs(float(np.diff(unwrap_crank(time, crank)[[0, -1]])[0]))
        if turned > 6.0 * np.pi:
            return turn_means(time, angle, crank)
    parts = max(2, int((time[-1] - time[0]) / 0.05))
    parts = min(parts, len(time))
    middle = np.array([float(part.mean()) for part in np.array_split(time, parts)])
    return middle, np.array([float(part.mean()) for part in np.array_split(angle, parts)])


def settled(
    time_s: ArrayLike,
    angle_rad: ArrayLike,
    crank_rad: ArrayLike | None = None,
    *,
    ringing_below_rad: float = 0.15 * DEG,
    drift_below_rad_per_s: float = 0.2 * DEG,
    flap_drift_below: float = 0.004,
) -> Settling:
    """Whether flap rate and mean position stand still, and no ringing is left, over a window.

    A drift counts when it is larger than its limit and than twice its own uncertainty; ringing is the larger
    of the rms of the slow motion in the two halves, less nothing (random torque keeps some alive, so the
    limit must lie above the ambient motion). flap_drift_below: relative change over the window.
    """
    time, angle = np.asarray(time_s, dtype=float), np.asarray(angle_rad, dtype=float)
    crank = None if crank_rad is None else np.asarray(crank_rad, dtype=float)
    middle, slow = slow_motion(time, angle, crank)
    if len(slow) < 6:
        return Settling(False, "the window is too short to tell", float("nan"), float("nan"))
    local = middle - middle.mean()
    slope = float(local @ slow) / float(local @ local)
    left = slow - slow.mean() - slope * local
    half = len(slow) // 2
    ringing = max(float(left[:half].std()), float(left[half:].std()))
    # Uncertainty of the slope from the two halves' means, their correlation included.
    span = float(middle[-1] - middle[0])
    noise = float(np.sqrt(mean_variance(left[:half]) + mean_variance(left[half:]))) / (0.5 * span)
    if ringing > ringing_below_rad:
        return Settling(False, f"still rings by {ringing / DEG:.2f} deg rms", slope, ringing)
    if abs(slope) > drift_below_rad_per_s and abs(slope) > 2.0 * noise:
        return Settling(False, f"its mean position drifts by {slope / DEG:.2f} deg/s", slope, ringing)
    if crank is not None:
        _, rate = turn_rate(time, crank)
        if len(rate) >= 8:
            early, late = rate[: len(rate) // 3], rate[-(len(rate) // 3) :]
            change = float(late.mean() - early.mean())
            spread = float(np.sqrt(early.var() + late.var()))
            if abs(change) > flap_drift_below * float(rate.mean()) and abs(change) > spread:
                return Settling(False, f"the flap rate still changes by {change:+.2f} Hz", slope, ringing)
    return Settling(True, "", slope, ringing)


def after_tap(
    time_s: ArrayLike,
    angle_rad: ArrayLike,
    crank_rad: ArrayLike | None = None,
    *,
    rest_rad: float,
    stops_rad: tuple[float, float],
    rest_std_rad: float = 0.02 * DEG,
    resolution_rad: float = 2.0 * np.pi / 8192,
    margin_rad: float = STOP_MARGIN,
) -> Return:
    """What became of the body after a tap: it returned, was lost to a stop, or stays displaced.

    rest_rad, rest_std_rad: mean position before the tap. A touch that the body leaves again, coming back to
    its rest, is a return (the reason says so); staying near a stop, or being thrown about in the last third,
    is a loss. "displaced": free, motionless and away from the rest by more than friction-free noise allows.
    """
    time, angle = np.asarray(time_s, dtype=float), np.asarray(angle_rad, dtype=float)
    crank = None if crank_rad is None else np.asarray(crank_rad, dtype=float)
    touched = contact(angle, stops_rad, margin_rad)
    on_stop = touched.low | touched.high
    tail = time >= time[-1] - (time[-1] - time[0]) / 3.0
    if on_stop[tail].any():
        first = float(time[np.argmax(on_stop)] - time[0])
        side = "lower" if touched.low[tail].any() else "upper"
        return Return("lost", f"lost to the {side} end stop {first:.2f} s after the tap", first)
    middle, slow = slow_motion(time, angle, crank)
    late = slow[middle >= time[-1] - (time[-1] - time[0]) / 3.0]
    if len(late) < 2:
        return Return("lost", "the record after the tap is too short to see a return")
    away = float(late.mean()) - rest_rad
    largest = float(np.max(np.abs(slow - rest_rad)))
    swing = float(late.std())
    allowed = max(0.35 * largest, 4.0 * rest_std_rad, 3.0 * swing, 2.0 * resolution_rad)
    if float(np.ptp(late)) < 1.5 * resolution_rad and abs(away) > max(
        4.0 * rest_std_rad, 6.0 * resolution_rad
    ):
        return Return("displaced", f"stands still {away / DEG:+.2f} deg from its rest: held by friction")
    if abs(away) > allowed:
        return Return("lost", f"did not come back: {away / DEG:+.2f} deg from its rest at the end")
    growing = _late_growth(middle, slow, rest_rad)
    if growing > 1.5 and swing > 4.0 * rest_std_rad:
        return Return("lost", f"its swing grows ({growing:.1f} times over the record)")
    if on_stop.any():
        return Return("returned", "returned after touching an end stop")
    return Return("returned", "returned")


def _late_growth(middle: FloatArray, slow: FloatArray, rest: float) -> float:
    third = (middle[-1] - middle[0]) / 3.0
    early = slow[middle <= middle[0] + third] - rest
    late = slow[middle >= middle[-1] - third] - rest
    return float(
        np.sqrt(np.mean((late - late.mean()) ** 2) / max(np.mean((early - early.mean()) ** 2), 1e-30))
    )


def _in_contact(time: FloatArray, angle: FloatArray, touched: Contact) -> tuple[str, str]:
    on_stop = touched.low | touched.high
    share = float(on_stop.mean())
    if touched.low.any() and touched.high.any():
        tail = time >= time[-1] - 0.3 * (time[-1] - time[0])
        return "bouncing", "thrown between both end stops" + (
            "" if on_stop[tail].any() else ", free at the end"
        )
    side = "lower" if touched.low.any() else "upper"
    span = time[-1] - time[0]
    first = float(time[np.argmax(on_stop)] - time[0])
    late = on_stop[time >= time[0] + 0.5 * (first + span)] if first < span else on_stop[-1:]
    if first > 0.25 * span and late.any():
        return "lost", f"reached the {side} end stop {first:.2f} s into the window"
    leaves = int(np.sum(np.diff(on_stop.astype(int)) == -1))
    reach = float(np.ptp(angle))
    if share > 0.5 and reach < 1.5 * DEG:
        return "at_stop", f"lies on the {side} end stop"
    if share > 0.9:
        return "at_stop", f"lies on the {side} end stop"
    return "bouncing", f"touches the {side} end stop {leaves + 1} times, swinging over {reach / DEG:.1f} deg"
