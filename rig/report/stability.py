"""The stability map: what holds the body, against how fast the wings beat."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from typing import TYPE_CHECKING, Any

import numpy as np

from rig.report import palette
from rig.report.curves import MapCurve
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
        _angle_panel(angle, result, theory, span, stops_deg)
        handles, labels = _legend_entries(stiffness)
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
    _boundary_bands(axes, result, square=True)
    axes.axhline(0.0, color=palette.INK, linewidth=0.9, zorder=1.5)
    for curve, style in ((fit, _FIT), (theory, _THEORY)):
        if curve is not None:
            axes.plot(curve.flap_hz**2, curve.stiffness_per_s2, label=curve.label, **style)
    _levels(axes, result.levels, lambda level: level.stiffness_per_s2, square=True)
    kappas = _ends(level.stiffness_per_s2 for level in result.levels)
    low, high = (min(0.0, *kappas), max(0.0, *kappas)) if kappas else (-20.0, 100.0)
    room = 0.1 * (high - low) or 1.0
    axes.set_ylim(low - 1.6 * room, high + room)
    axes.set_xlim(span[0] ** 2, span[1] ** 2)
    _not_held_strip(axes, result.levels)
    _hertz_on_top(axes, span)


def _decay_panel(
    axes: Axes, result: SessionResult, theory: MapCurve | None, span: tuple[float, float]
) -> None:
    axes.set_title("Decay rate (positive: decays)")
    axes.set_xlabel("flap rate  (Hz)")
    axes.set_ylabel("decay rate  σ  (1/s)")
    axes.axhline(0.0, color=palette.INK, linewidth=0.9, zorder=1.5)
    _boundary_bands(axes, result, square=False)
    if theory is not None and theory.decay_per_s is not None:
        axes.plot(theory.flap_hz, theory.decay_per_s, **_THEORY)
    _levels(axes, result.levels, lambda level: level.decay_per_s, square=False)
    _span_of(axes, result.levels, lambda level: level.decay_per_s, include=(0.0,), fallback=(-1.0, 1.0))
    axes.set_xlim(*span)


def _angle_panel(
    axes: Axes,
    result: SessionResult,
    theory: MapCurve | None,
    span: tuple[float, float],
    stops_deg: tuple[float, float] | None,
) -> None:
    axes.set_title("Mean body angle")
    axes.set_xlabel("flap rate  (Hz)")
    axes.set_ylabel("mean angle  (deg)")
    _boundary_bands(axes, result, square=False)
    if theory is not None and theory.mean_angle_deg is not None:
        axes.plot(theory.flap_hz, theory.mean_angle_deg, **_THEORY)
    _levels(axes, result.levels, lambda level: level.mean_angle_deg, square=False)
    _span_of(
        axes, result.levels, lambda level: level.mean_angle_deg, include=stops_deg or (), fallback=(-5.0, 5.0)
    )
    if stops_deg is not None:
        end_stops(axes, stops_deg)
    axes.set_xlim(*span)


def end_stops(axes: Axes, stops_deg: tuple[float, float]) -> None:
    """Hatch what lies beyond the end stops (deg), as on a drawing."""
    bottom, top = axes.get_ylim()
    for edge, end, name, side in (
        (stops_deg[0], bottom, "lower stop", "bottom"),
        (stops_deg[1], top, "upper stop", "top"),
    ):
        axes.axhspan(
            edge, end, facecolor="none", edgecolor=palette.FAINT, hatch="////", linewidth=0.0, zorder=0.6
        )
        axes.axhline(edge, color=palette.FAINT, linewidth=0.8, zorder=0.7)
        axes.text(
            0.985, edge, name, transform=axes.get_yaxis_transform(), ha="right",
            va="bottom" if side == "bottom" else "top", fontsize=6.8, color=palette.INK,
        )  # fmt: skip
    axes.set_ylim(bottom, top)


_THEORY: dict[str, Any] = {
    "color": palette.THEORY_COLOUR,
    "linestyle": (0, (5, 2.5)),
    "linewidth": 1.1,
    "zorder": 2.5,
}
_FIT: dict[str, Any] = {"color": palette.FIT_COLOUR, "linestyle": "-", "linewidth": 1.3, "zorder": 2.4}


def _levels(
    axes: Axes, levels: Iterable[LevelResult], quantity: Callable[[LevelResult], Measured], *, square: bool
) -> None:
    power = 2 if square else 1
    for level in levels:
        number, rate = quantity(level), level.flap_hz
        if number.value is None or rate.value is None:
            continue
        colour = palette.DIRECTION_COLOUR.get(level.direction, palette.INK)
        x = rate.value**power
        if number.low is not None and number.high is not None:
            axes.plot([x, x], [number.low, number.high], color=colour, linewidth=1.0, zorder=3)
        if rate.low is not None and rate.high is not None:
            axes.plot(
                [rate.low**power, rate.high**power], [number.value] * 2, color=colour, linewidth=1.0, zorder=3
            )
        faces = {"stable": colour, "undetermined": palette.PAPER}
        marker = palette.DIRECTION_MARKER.get(level.direction, "o")
        held = level.state == "held"
        if level.regime == "unstable" or not held:
            marker, face = "x", colour
        else:
            face = faces.get(level.regime, palette.PAPER)
        axes.plot(
            [x], [number.value], marker=marker, markersize=5.8 if marker != "x" else 5.0, linestyle="none",
            color=colour, markerfacecolor=face, markeredgewidth=1.1, zorder=3.5, alpha=1.0 if held else 0.75,
        )  # fmt: skip


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


def _boundary_bands(axes: Axes, result: SessionResult, *, square: bool) -> None:
    power = 2 if square else 1
    for direction, boundary in (("falling", result.falling), ("rising", result.rising)):
        rate = boundary.flap_hz
        if boundary.kind == "not_located" or rate.value is None:
            continue
        colour = palette.DIRECTION_COLOUR[direction]
        if rate.low is not None and rate.high is not None:
            axes.axvspan(
                rate.low**power, rate.high**power, color=colour, alpha=0.16, linewidth=0.0, zorder=0.5
            )
        axes.axvline(
            rate.value**power, color=colour, linewidth=1.0, linestyle=_BOUNDARY_LINE[direction], zorder=1.2
        )


_BOUNDARY_LINE: dict[str, Any] = {"falling": (0, (6, 1.5, 1, 1.5)), "rising": (0, (1.2, 1.6))}


def _not_held_strip(axes: Axes, levels: Iterable[LevelResult]) -> None:
    drawn = False
    for level in levels:
        if level.state == "held" or level.flap_hz.value is None or level.stiffness_per_s2.value is not None:
            continue
        colour = palette.DIRECTION_COLOUR.get(level.direction, palette.INK)
        height = 0.075 if level.direction == "rising" else 0.035
        axes.plot(
            [level.flap_hz.value**2], [height], marker="x", markersize=4.6, markeredgewidth=1.1,
            linestyle="none", color=colour, transform=axes.get_xaxis_transform(), zorder=3,
        )  # fmt: skip
        drawn = True
    if drawn:
        axes.text(
            0.995, 0.03, "crosses on this strip: levels at which the body was not held",
            transform=axes.transAxes, ha="right", va="bottom", fontsize=6.8, color=palette.INK,
        )  # fmt: skip


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


def _legend_entries(axes: Axes) -> tuple[list[Any], list[str]]:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    blue, red = palette.DIRECTION_COLOUR["falling"], palette.DIRECTION_COLOUR["rising"]
    entries: list[tuple[Any, str]] = [
        (
            Line2D([], [], marker="v", color=blue, markersize=5.8, linewidth=1.0),
            "falling level, 95 % interval",
        ),
        (Line2D([], [], marker="^", color=red, markersize=5.8, linewidth=1.0), "rising level, 95 % interval"),
        (
            Line2D(
                [],
                [],
                marker="v",
                color=palette.INK,
                markerfacecolor=palette.PAPER,
                markersize=5.8,
                linestyle="",
            ),
            "hollow: undetermined;  ✕: unstable or not held",
        ),
        (
            (
                Patch(color=blue, alpha=0.16, linewidth=0.0),
                Line2D([], [], color=blue, linestyle=_BOUNDARY_LINE["falling"]),
            ),
            "boundary falling, 95 % band",
        ),
        (
            (
                Patch(color=red, alpha=0.16, linewidth=0.0),
                Line2D([], [], color=red, linestyle=_BOUNDARY_LINE["rising"]),
            ),
            "boundary rising, 95 % band",
        ),
    ]
    entries += list(zip(*axes.get_legend_handles_labels(), strict=True))
    return [handle for handle, _ in entries], [label for _, label in entries]
