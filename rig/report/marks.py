"""The signs of the stability map: levels, boundaries, end stops, and the legend that explains them."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import TYPE_CHECKING, Any

from rig.report import palette
from rig.results import Boundary, LevelResult, Measured, SessionResult

if TYPE_CHECKING:
    from matplotlib.axes import Axes

THEORY_LINE: dict[str, Any] = {
    "color": palette.THEORY_COLOUR,
    "linestyle": (0, (5, 2.5)),
    "linewidth": 1.1,
    "zorder": 2.5,
}
FIT_LINE: dict[str, Any] = {"color": palette.FIT_COLOUR, "linestyle": "-", "linewidth": 1.3, "zorder": 2.4}
BOUNDARY_LINE: dict[str, Any] = {"falling": (0, (6, 1.5, 1, 1.5)), "rising": (0, (1.2, 1.6))}


def draw_levels(
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


def draw_not_held(axes: Axes, levels: Iterable[LevelResult]) -> None:
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


def draw_boundaries(axes: Axes, result: SessionResult, *, square: bool) -> None:
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
            rate.value**power, color=colour, linewidth=1.0, linestyle=BOUNDARY_LINE[direction], zorder=1.2
        )


def draw_end_stops(axes: Axes, stops_deg: tuple[float, float]) -> None:
    """Hatch what lies beyond the end stops (deg), as on a drawing."""
    bottom, top = axes.get_ylim()
    for edge, end, name in ((stops_deg[0], bottom, "lower stop"), (stops_deg[1], top, "upper stop")):
        axes.axhspan(
            edge, end, facecolor="none", edgecolor=palette.FAINT, hatch="////", linewidth=0.0, zorder=0.6
        )
        axes.axhline(edge, color=palette.FAINT, linewidth=0.8, zorder=0.7)
        axes.text(
            0.985, 0.5 * (edge + end), name, transform=axes.get_yaxis_transform(), ha="right", va="center",
            fontsize=6.8, color=palette.INK, bbox={"facecolor": palette.PAPER, "linewidth": 0.0, "pad": 1.2},
        )  # fmt: skip
    axes.set_ylim(bottom, top)


def legend_entries(axes: Axes, result: SessionResult) -> tuple[list[Any], list[str]]:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    entries: list[tuple[Any, str]] = []
    for direction, colour in palette.DIRECTION_COLOUR.items():
        marker = palette.DIRECTION_MARKER[direction]
        level = Line2D([], [], marker=marker, color=colour, markersize=5.8, linewidth=1.0)
        entries.append((level, f"{direction} level, 95 % interval"))
    hollow = Line2D(
        [], [], marker="v", color=palette.INK, markerfacecolor=palette.PAPER, markersize=5.8, linestyle=""
    )
    entries.append((hollow, "hollow: undetermined;  ✕: unstable or not held"))
    for direction, boundary in (("falling", result.falling), ("rising", result.rising)):
        if located(boundary):
            colour = palette.DIRECTION_COLOUR[direction]
            band = Patch(color=colour, alpha=0.16, linewidth=0.0)
            edge = Line2D([], [], color=colour, linestyle=BOUNDARY_LINE[direction])
            entries.append(((band, edge), f"boundary {direction}, 95 % band"))
    entries += list(zip(*axes.get_legend_handles_labels(), strict=True))
    return [handle for handle, _ in entries], [label for _, label in entries]


def located(boundary: Boundary) -> bool:
    return boundary.kind != "not_located" and boundary.flap_hz.value is not None
