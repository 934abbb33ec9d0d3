"""The stability map: what holds the body, against how fast the wings beat."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from typing import TYPE_CHECKING

import numpy as np

from rig.report import palette
from rig.report.curves import MapCurve
from rig.report.marks import (
    FIT_LINE,
    THEORY_LINE,
    draw_boundaries,
    draw_end_stops,
    draw_levels,
    draw_not_held,
    legend_entries,
)
from rig.results import LevelResult, Measured, SessionResult

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

WIDTH_IN, HEIGHT_IN = 7.3, 7.0


def map_figure(
    result: SessionResult,
    theory: MapCurve | None = None,
    *,
    fit: MapCurve | None = None,
    stops_deg: tuple[float, float] | None = None,
) -> Figure:
    """Stability map: slow stiffness (1/s^2) against flap rate squared (Hz^2) with 95 % intervals, below it
    decay rate (1/s) and mean body angle (deg) against flap rate (Hz).

    Falling and rising levels differ in the marker's direction and colour, regimes in its filling. The body's
    boundaries are bands as wide as their 95 % intervals; levels at which the body was not held are ticks on
    the zero line's strip. `stops_deg` (low, high) draws the end stops. Works without any level.
    """
    from matplotlib import rc_context
    from matplotlib.figure import Figure
    from matplotlib.layout_engine import ConstrainedLayoutEngine

    with rc_context(palette.FIGURE_STYLE):
        spacing = ConstrainedLayoutEngine(h_pad=0.06, w_pad=0.06, hspace=0.03, wspace=0.04)
        figure = Figure(figsize=(WIDTH_IN, HEIGHT_IN), layout=spacing)
        grid = figure.add_gridspec(2, 2, height_ratios=(1.55, 1.0))
        stiffness = figure.add_subplot(grid[0, :])
        decay = figure.add_subplot(grid[1, 0])
        angle = figure.add_subplot(grid[1, 1])
        span = _flap_span(result, theory, fit)
        _stiffness_panel(stiffness, result, theory, fit, span)
        _decay_panel(decay, result, theory, span)
        _angle_panel(angle, result, theory, fit, span, stops_deg)
        handles, labels = legend_entries(stiffness, result)
        figure.legend(
            handles, labels, loc="outside lower center", ncols=3, columnspacing=2.2, handlelength=2.2
        )
        return figure


def _flap_span(result: SessionResult, *curves: MapCurve | None) -> tuple[float, float]:
    rates = [level.flap_hz.value for level in result.levels]
    rates += [result.falling.flap_hz.value, result.rising.flap_hz.value]
    found = [rate for rate in rates if rate is not None and math.isfinite(rate)]
    if not found:
        found = [float(end) for curve in curves if curve is not None for end in curve.flap_hz[[0, -1]]]
    if not found:
        return 0.0, 40.0
    low, high = min(found), max(found)
    margin = max(0.04 * (high - low), 0.5)
    return max(low - margin, 0.0), high + margin


def _stiffness_panel(
    axes: Axes,
    result: SessionResult,
    theory: MapCurve | None,
    fit: MapCurve | None,
    span: tuple[float, float],
) -> None:
    axes.set_title("Slow stiffness of the body against flap rate squared")
    axes.set_ylabel("slow stiffness  κ  (1/s²)")
    axes.set_xlabel("flap rate squared  (Hz²)")
    draw_boundaries(axes, result, square=True)
    axes.axhline(0.0, color=palette.INK, linewidth=0.9, zorder=1.5)
    for curve, style in ((fit, FIT_LINE), (theory, THEORY_LINE)):
        if curve is not None:
            axes.plot(curve.flap_hz**2, curve.stiffness_per_s2, label=curve.label, **style)
    draw_levels(axes, result.levels, lambda level: level.stiffness_per_s2, square=True)
    kappas = _ends(level.stiffness_per_s2 for level in result.levels)
    low, high = (min(0.0, *kappas), max(0.0, *kappas)) if kappas else (-20.0, 100.0)
    if not kappas:
        axes.text(
            0.5, 0.5, "no level showed a slow mode", transform=axes.transAxes, ha="center", color=palette.INK
        )
    room = 0.1 * (high - low) or 1.0
    axes.set_ylim(low - 1.6 * room, high + room)
    axes.set_xlim(span[0] ** 2, span[1] ** 2)
    draw_not_held(axes, result.levels)
    _hertz_on_top(axes, span)


def _decay_panel(
    axes: Axes, result: SessionResult, theory: MapCurve | None, span: tuple[float, float]
) -> None:
    axes.set_title("Decay rate (positive: decays)")
    axes.set_xlabel("flap rate  (Hz)")
    axes.set_ylabel("decay rate  σ  (1/s)")
    axes.axhline(0.0, color=palette.INK, linewidth=0.9, zorder=1.5)
    draw_boundaries(axes, result, square=False)
    if theory is not None and theory.decay_per_s is not None:
        axes.plot(theory.flap_hz, theory.decay_per_s, **THEORY_LINE)
    draw_levels(axes, result.levels, lambda level: level.decay_per_s, square=False)
    _span_of(axes, result.levels, lambda level: level.decay_per_s, include=(0.0,), fallback=(-1.0, 1.0))
    axes.set_xlim(*span)


def _angle_panel(
    axes: Axes,
    result: SessionResult,
    theory: MapCurve | None,
    fit: MapCurve | None,
    span: tuple[float, float],
    stops_deg: tuple[float, float] | None,
) -> None:
    axes.set_title("Mean body angle")
    axes.set_xlabel("flap rate  (Hz)")
    axes.set_ylabel("mean angle  (deg)")
    draw_boundaries(axes, result, square=False)
    for curve, style in ((fit, FIT_LINE), (theory, THEORY_LINE)):
        if curve is not None and curve.mean_angle_deg is not None:
            axes.plot(curve.flap_hz, curve.mean_angle_deg, **style)
    draw_levels(axes, result.levels, lambda level: level.mean_angle_deg, square=False)
    _span_of(
        axes, result.levels, lambda level: level.mean_angle_deg, include=stops_deg or (), fallback=(-5.0, 5.0)
    )
    if stops_deg is not None:
        draw_end_stops(axes, stops_deg)
    axes.set_xlim(*span)


def _ends(numbers: Iterable[Measured]) -> list[float]:
    """Values and interval ends; the ends of a very wide interval are left out, lest it flatten the rest."""
    known = [number for number in numbers if number.value is not None and math.isfinite(number.value)]
    if not known:
        return []
    values = [float(number.value) for number in known if number.value is not None]
    spread = max(max(values) - min(values), max(abs(value) for value in values), 1e-9)
    ends = list(values)
    for number in known:
        ends += [
            end
            for end in (number.low, number.high)
            if end is not None and abs(end - (number.value or 0.0)) < 0.6 * spread
        ]
    return ends


def _span_of(
    axes: Axes,
    levels: Iterable[LevelResult],
    quantity: Callable[[LevelResult], Measured],
    *,
    include: tuple[float, ...],
    fallback: tuple[float, float],
) -> None:
    ends = [*_ends(quantity(level) for level in levels), *include]
    if len(set(ends)) < 2:
        ends += fallback
    low, high = min(ends), max(ends)
    axes.set_ylim(low - 0.1 * (high - low), high + 0.12 * (high - low))


def _hertz_on_top(axes: Axes, span: tuple[float, float]) -> None:
    from matplotlib.ticker import FixedFormatter, FixedLocator, NullLocator

    low, high = span
    step = next(size for size in (1.0, 2.0, 5.0, 10.0, 20.0, 50.0, 1e9) if (high - low) / size <= 11)
    rates = np.arange(math.ceil(low / step), math.floor(high / step) + 1) * step
    # On a scale of squares low rates crowd: keep those at least 5 % of the width apart.
    kept: list[float] = []
    for rate in rates[::-1]:
        if not kept or kept[-1] ** 2 - rate**2 >= 0.05 * (high**2 - low**2):
            kept.append(float(rate))
    top = axes.secondary_xaxis("top")
    top.xaxis.set_major_locator(FixedLocator([rate**2 for rate in kept]))
    top.xaxis.set_major_formatter(FixedFormatter([f"{rate:g}" for rate in kept]))
    top.xaxis.set_minor_locator(NullLocator())
    top.spines["top"].set_visible(True)
    top.set_xlabel("flap rate  (Hz)")
