"""Smooth curves that go into the stability map beside the measured levels."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analysis.boundary.form import FittedForm
from rig.results import LevelResult, SessionResult

Values = NDArray[np.float64]


@dataclass(frozen=True)
class MapCurve:
    """A curve over flap rate (Hz): slow stiffness 1/s^2, and, where known, decay rate 1/s and mean angle deg.

    All arrays have the shape of `flap_hz`; `label` stands in the legend.
    """

    label: str
    flap_hz: Values
    stiffness_per_s2: Values
    decay_per_s: Values | None = None
    mean_angle_deg: Values | None = None


def form_points(form: FittedForm, top_hz: float, points: int = 60) -> tuple[tuple[float, float, float], ...]:
    """A boundary's fitted form from its edge up to `top_hz`, as `SessionResult.fit_curve` keeps it."""
    # Near the edge all goes with the square root of the distance: points crowd there.
    flap = form.boundary_hz + (top_hz - form.boundary_hz) * np.linspace(0.0, 1.0, points) ** 2
    degrees = 180.0 / np.pi
    found = [(rate, form.stiffness_per_s2(rate), degrees * form.angle_rad(rate)) for rate in flap.tolist()]
    # At the edge itself the rest is a double root, which rounding may take away.
    return tuple(point for point in found if all(math.isfinite(number) for number in point))


def fitted_curve(result: SessionResult) -> MapCurve | None:
    """What was fitted to the levels: the boundary's form, else the straight line, else nothing."""
    if len(result.fit_curve) > 1:
        flap, stiffness, angle = np.array(result.fit_curve, dtype=np.float64).T
        return MapCurve("fit: averaged form", flap, stiffness, None, angle)
    return straight_fit(result)


def straight_fit(result: SessionResult) -> MapCurve | None:
    """The straight line of slow stiffness on flap rate squared that the vibration verdict rests on.

    None where the verdict gives no slope. Without an intercept among its numbers the line is laid through
    the median of the held levels.
    """
    slope = result.vibration.numbers.get("slope")
    if slope is None or slope.value is None:
        return None
    levels = [level for level in result.levels if level.state == "held" and has_stiffness(level)]
    if not levels:
        return None
    squares = np.array([float(level.flap_hz.value or 0.0) ** 2 for level in levels])
    intercept = result.vibration.numbers.get("intercept")
    if intercept is not None and intercept.value is not None:
        start = intercept.value
    else:
        # Levels near the edge lie below the line, for there the body leans away: a median passes them by.
        kappa = np.array([float(level.stiffness_per_s2.value or 0.0) for level in levels])
        start = float(np.median(kappa - slope.value * squares))
    flap = np.sqrt(np.linspace(squares.min(), squares.max(), 40))
    return MapCurve("straight line through the levels", flap, start + slope.value * flap**2)


def has_stiffness(level: LevelResult) -> bool:
    return level.stiffness_per_s2.value is not None and level.flap_hz.value is not None
