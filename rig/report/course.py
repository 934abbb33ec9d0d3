"""The course of a run over time: drive, flap rate and body angle, with levels and taps marked."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from rig.description import RigDescription
from rig.events import Event
from rig.report import palette
from rig.report.marks import draw_end_stops
from rig.report.timing import BoardClock
from rig.report.trace import Streams, binned, channel, flap_course, zigzag
from rig.results import SessionResult

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

BINS = 700
RAD_TO_DEG = 180.0 / np.pi


def course_figure(
    rig: RigDescription, result: SessionResult, streams: Streams, events: Sequence[Event], clock: BoardClock
) -> Figure:
    """Drive voltage (V), flap rate (Hz) and body angle (deg) over session time (s).

    Levels are shaded in turn and numbered; each tap is a triangle pointing the way it pushed, filled where
    the body returned. Every bin shows its lowest and highest sample.
    """
    from matplotlib import rc_context
    from matplotlib.figure import Figure

    with rc_context(palette.FIGURE_STYLE):
        figure = Figure(figsize=(7.3, 5.6), layout="constrained")
        drive, flap, taps, body = figure.subplots(4, 1, sharex=True, height_ratios=(1.0, 1.0, 0.3, 1.9))
        time = np.asarray(streams.time_s, dtype=np.float64)
        _drive(drive, rig, streams, events, clock, time)
        crank = channel(streams, rig, "crank angle")
        flap.set_ylabel("flap rate (Hz)")
        if crank is not None and len(time) > 1:
            flap.plot(*flap_course(time, crank, BINS), color=palette.INK, linewidth=1.0)
        angle = channel(streams, rig, "body angle")
        body.set_ylabel("body angle (deg)")
        body.set_xlabel("time since the start of the session (s)")
        if angle is not None and len(time):
            course = binned(time, angle * RAD_TO_DEG, BINS)
            body.plot(
                *zigzag(course), color=palette.SKY_BLUE, linewidth=0.5, label="lowest to highest sample"
            )
            body.plot(course.time_s, course.mean, color=palette.INK, linewidth=0.9, label="mean")
        if len(time) > 1:
            body.set_xlim(time[0], time[-1])
        stops = (rig.stops.low_rad * RAD_TO_DEG, rig.stops.high_rad * RAD_TO_DEG)
        reach = stops[1] - stops[0]
        body.set_ylim(stops[0] - 0.12 * reach, stops[1] + 0.12 * reach)
        draw_end_stops(body, stops)
        _taps(taps, result, clock)
        for axes in (drive, flap, taps, body):
            _levels(axes, events, clock, number=axes is drive)
            _trips(axes, events, clock, named=axes is drive)
        return figure


def _drive(
    axes: Axes,
    rig: RigDescription,
    streams: Streams,
    events: Sequence[Event],
    clock: BoardClock,
    time: np.ndarray,
) -> None:
    axes.set_ylabel("drive (V)")
    measured = channel(streams, rig, "motor voltage")
    if measured is not None and len(time):
        course = binned(time, measured, BINS)
        axes.plot(*zigzag(course), color=palette.SKY_BLUE, linewidth=0.5)
        axes.plot(course.time_s, course.mean, color=palette.INK, linewidth=1.0)
        return
    # Without a voltage channel the commanded targets are all there is to show.
    orders = [
        (clock.seconds(event.tick), float(event.data["target_v"]))
        for event in events
        if event.kind == "drive"
    ]
    if orders:
        when, target = zip(*orders, strict=True)
        axes.step(when, target, where="post", color=palette.INK, linewidth=1.0)


def _levels(axes: Axes, events: Sequence[Event], clock: BoardClock, *, number: bool) -> None:
    spans = level_spans(events, clock)
    # Numbers that would touch each other are thinned, the shading stays.
    every = max(1, -(-len(spans) // 45))
    for index, (level, start, end) in enumerate(spans):
        if index % 2 == 0:
            axes.axvspan(start, end, color=palette.WASH, linewidth=0.0, zorder=0.1)
        if number and index % every == 0:
            axes.text(
                0.5 * (start + end), 1.02, str(level), transform=axes.get_xaxis_transform(), ha="center",
                va="bottom", fontsize=6.2, color=palette.INK,
            )  # fmt: skip


def level_spans(events: Sequence[Event], clock: BoardClock) -> list[tuple[int, float, float]]:
    """(number, start s, end s) of each level visited, in order."""
    spans: list[tuple[int, float, float]] = []
    open_level: tuple[int, float] | None = None
    for event in events:
        if event.kind not in ("level", "level_end", "trip", "halt", "finished"):
            continue
        if open_level is not None:
            spans.append((*open_level, clock.seconds(event.tick)))
        open_level = (int(event.data["level"]), clock.seconds(event.tick)) if event.kind == "level" else None
    return spans


def _taps(axes: Axes, result: SessionResult, clock: BoardClock) -> None:
    axes.set_ylabel("taps", rotation="horizontal", ha="right", va="center")
    axes.set_ylim(-1.0, 1.0)
    axes.tick_params(left=False, labelleft=False, bottom=False)
    axes.spines[["left", "bottom"]].set_visible(False)
    axes.axhline(0.0, color=palette.RULE, linewidth=0.6)
    size = 4.2 if len(result.taps) < 100 else 2.6
    for tap in result.taps:
        push = tap.kick_rad_per_s if tap.kick_rad_per_s is not None else tap.impulse_n_m_s
        marker = "d" if push is None else "^" if push > 0.0 else "v"
        colour = palette.GREEN if tap.returned else palette.VERMILLION
        axes.plot(
            [clock.seconds(tap.tick)], [0.5 if tap.returned else -0.5], marker=marker, markersize=size,
            linestyle="none", color=colour, markerfacecolor=colour if tap.returned else palette.PAPER,
            markeredgewidth=0.2 * size, zorder=4,
        )  # fmt: skip


def _trips(axes: Axes, events: Sequence[Event], clock: BoardClock, *, named: bool) -> None:
    for event in events:
        if event.kind == "trip":
            axes.axvline(clock.seconds(event.tick), color=palette.VERMILLION, linewidth=1.2, zorder=3)
            if named:
                axes.text(
                    clock.seconds(event.tick), 0.96, " trip", transform=axes.get_xaxis_transform(), va="top",
                    fontsize=6.8, color=palette.VERMILLION,
                )  # fmt: skip
