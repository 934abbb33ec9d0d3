"""A tap as recorded, the model fitted to it and what the model leaves over."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from analysis.decay.slow import slow_model
from analysis.position import turn_means
from rig.description import RigDescription
from rig.report import palette
from rig.report.timing import BoardClock
from rig.report.trace import Streams, binned, channel, zigzag
from rig.results import Measured, SessionResult, TapResult

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from analysis.decay.result import DecayFit

Values = NDArray[np.float64]
RAD_TO_DEG = 180.0 / np.pi
BEFORE_S, AFTER_S = 0.8, 0.5
#: Changes of the fitted interval whose effect is told: later start (s) and share of the interval kept.
VARIATIONS = (
    ("start 50 ms later", 0.05, 1.0),
    ("start 150 ms later", 0.15, 1.0),
    ("last quarter left out", 0.0, 0.75),
)

#: Fits one record: time s, angle rad, crank phase rad or None.
Fit = Callable[[Values, Values, "Values | None"], "DecayFit"]


@dataclass(frozen=True)
class ShownTap:
    """A tap chosen for its picture: its rows, its fit, and the fit under other intervals."""

    tap: TapResult
    place: str
    time_s: Values
    angle_rad: Values
    crank_rad: Values | None
    tap_s: float
    fit: DecayFit
    variations: tuple[tuple[str, Measured], ...]


def plain_fit(time_s: Values, angle_rad: Values, crank_rad: Values | None) -> DecayFit:
    """Least-squares fit of one record alone, as quick as a picture needs it."""
    from analysis.decay import fit_decay

    return fit_decay(time_s, angle_rad, crank_rad, thorough=False)


def representative_taps(result: SessionResult, drives_v: dict[int, float]) -> list[tuple[str, TapResult]]:
    """An accepted tap nearest to the edge and one far above it; fewer where there are fewer.

    `drives_v` gives each visited level's drive. Of several taps at one drive the best determined is taken.
    """
    usable = [
        tap
        for tap in result.taps
        if tap.accepted and tap.returned and tap.start_s is not None and tap.end_s is not None
        and tap.decay_per_s.value is not None and tap.level in drives_v
    ]  # fmt: skip
    if not usable:
        return []

    def best(drive_v: float) -> TapResult:
        there = [tap for tap in usable if drives_v[tap.level] == drive_v]
        return min(there, key=lambda tap: (tap.decay_per_s.std or float("inf"), tap.tap))

    found = sorted({drives_v[tap.level] for tap in usable})
    chosen = [("Near the edge", best(found[0]))]
    if len(found) > 1:
        chosen.append(("Far above the edge", best(found[-1])))
    return chosen


def shown_tap(
    place: str,
    tap: TapResult,
    rig: RigDescription,
    streams: Streams,
    clock: BoardClock,
    fit: Fit = plain_fit,
    until_s: float = float("inf"),
) -> ShownTap | None:
    """Cut the tap out of the streams and fit its interval again; None where the rows are not there.

    until_s: when the next tap comes or the level ends; what follows does not belong in the picture.
    """
    angle = channel(streams, rig, "body angle")
    if angle is None or tap.start_s is None or tap.end_s is None:
        return None
    crank = channel(streams, rig, "crank angle")
    time = np.asarray(streams.time_s, dtype=np.float64)
    tap_s = clock.seconds(tap.tick)
    first = min(tap_s, tap.start_s) - BEFORE_S
    rows = slice(*np.searchsorted(time, (first, min(tap.end_s + AFTER_S, until_s - 0.01))))
    inside = _rows_between(time, tap.start_s, tap.end_s)
    if inside.stop - inside.start < 2:
        return None
    fitted = fit(time[inside], angle[inside], None if crank is None else crank[inside])
    variations = []
    for name, later_s, share in VARIATIONS:
        start = tap.start_s + later_s
        part = _rows_between(time, start, start + share * (tap.end_s - start))
        if part.stop - part.start >= 2:
            other = fit(time[part], angle[part], None if crank is None else crank[part])
            variations.append((name, _decay(other)))
    return ShownTap(
        tap, place, time[rows], angle[rows], None if crank is None else crank[rows], tap_s, fitted,
        (("as shown", _decay(fitted)), *variations),
    )  # fmt: skip


def _rows_between(time_s: Values, start_s: float, end_s: float) -> slice:
    """Rows from start to end, both included."""
    return slice(int(np.searchsorted(time_s, start_s)), int(np.searchsorted(time_s, end_s, side="right")))


def _decay(fit: DecayFit) -> Measured:
    if not np.isfinite(fit.decay_per_s):
        return Measured()
    return Measured(fit.decay_per_s, fit.decay_std_per_s, fit.decay_low_per_s, fit.decay_high_per_s)


def tap_figure(shown: ShownTap) -> Figure:
    """Body angle (deg) around a tap with cycle mean and model; below it the residual (deg), own scale."""
    from matplotlib import rc_context
    from matplotlib.figure import Figure

    with rc_context(palette.FIGURE_STYLE):
        figure = Figure(figsize=(7.3, 3.3), layout="constrained")
        above, below = figure.subplots(2, 1, sharex=True, height_ratios=(2.3, 1.0))
        tap, fit = shown.tap, shown.fit
        start = float(tap.start_s or 0.0)
        time = shown.time_s - shown.tap_s
        raw = binned(time, shown.angle_rad * RAD_TO_DEG, 900)
        above.plot(*zigzag(raw), color=palette.SKY_BLUE, linewidth=0.6, label="body angle")
        if shown.crank_rad is not None and len(time) > 2:
            middle, mean = turn_means(time, shown.angle_rad * RAD_TO_DEG, shown.crank_rad)
            above.plot(middle, mean, color=palette.INK, linewidth=1.1, label="mean over each wing beat")
        if len(fit.time_s) > 2:
            when = fit.time_s + start - shown.tap_s
            slow = slow_model(fit)
            above.plot(
                when, slow * RAD_TO_DEG, color=palette.VERMILLION, linestyle=(0, (4, 2)), linewidth=1.3,
                label="model, without flap ripple",
            )  # fmt: skip
            left = binned(when, fit.residual_rad * RAD_TO_DEG, 700)
            below.plot(*zigzag(left), color=palette.FAINT, linewidth=0.6)
        below.axhline(0.0, color=palette.INK, linewidth=0.8)
        _mark_interval(above, shown, label="interval used")
        _mark_interval(below, shown)
        above.text(
            0.0, 1.01, " tap", transform=above.get_xaxis_transform(), ha="center", va="bottom", fontsize=7.5
        )
        above.set_ylabel("body angle (deg)")
        below.set_ylabel("residual (deg)")
        below.set_xlabel("time since the tap (s)")
        above.set_xlim(time[0], time[-1])
        figure.legend(loc="outside upper right", ncols=4, columnspacing=1.6, handlelength=2.0)
        return figure


def _mark_interval(axes: Axes, shown: ShownTap, label: str | None = None) -> None:
    start, end = float(shown.tap.start_s or 0.0) - shown.tap_s, float(shown.tap.end_s or 0.0) - shown.tap_s
    axes.axvspan(start, end, color=palette.YELLOW, alpha=0.15, linewidth=0.0, zorder=0.2, label=label)
    axes.axvline(0.0, color=palette.INK, linewidth=0.9, linestyle=(0, (1, 1.5)))
