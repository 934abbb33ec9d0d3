"""The report of a session as one HTML page that needs nothing else."""

from __future__ import annotations

import contextlib
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from rig.description import RigDescription
from rig.events import Event
from rig.record.refusals import refusal
from rig.report import apparatus, doubts, methods, protection, summary, tables
from rig.report.course import course_figure
from rig.report.curves import MapCurve, fitted_curve
from rig.report.provenance import Provenance
from rig.report.rounding import NOT_KNOWN, bare, half_width_text, measured_text, value_text
from rig.report.stability import map_figure
from rig.report.tapfit import Fit, ShownTap, plain_fit, representative_taps, shown_tap, tap_figure
from rig.report.theory import averaged_curve
from rig.report.timing import BoardClock
from rig.report.trace import Streams
from rig.report.vector import inline_svg
from rig.report.wording import duration, sentence
from rig.results import Measured, SessionResult
from rig.run.cautions import CAUTIONS
from rig.steps import Protocol

RAD_TO_DEG = 180.0 / np.pi


def write_report(
    path: Path | str,
    *,
    rig: RigDescription,
    protocol: Protocol,
    result: SessionResult,
    streams: Streams,
    events: Sequence[Event],
    provenance: Provenance | None = None,
    theory: MapCurve | None = None,
    fit: MapCurve | None = None,
    fit_tap: Fit = plain_fit,
) -> None:
    """Write the report of one session to `path`: one HTML file, readable without network, printable on A4.

    streams: the board's stream (time_s in s, channels in SI units by the rig's names). theory, fit: curves
    for the stability map, else the averaged body and what the result holds. fit_tap: how
    a tap's curve is fitted for its picture. The file appears whole or not at all. Raises OSError, its file the
    target.
    """
    page = render(
        rig=rig, protocol=protocol, result=result, streams=streams, events=events,
        provenance=provenance or Provenance(), theory=theory, fit=fit, fit_tap=fit_tap,
    )  # fmt: skip
    target = Path(path)
    part = target.with_name(target.name + ".part")
    try:
        part.write_text(page, encoding="utf-8")
        part.replace(target)
    except OSError as error:
        # Whoever asked knows the target only, and has no use for half a page beside it.
        with contextlib.suppress(OSError):
            part.unlink(missing_ok=True)
        raise OSError(error.errno, refusal(error, target), str(target)) from error


def render(
    *,
    rig: RigDescription,
    protocol: Protocol,
    result: SessionResult,
    streams: Streams,
    events: Sequence[Event],
    provenance: Provenance,
    theory: MapCurve | None = None,
    fit: MapCurve | None = None,
    fit_tap: Fit = plain_fit,
) -> str:
    """The page as text; every word that comes from a file is escaped."""
    from jinja2 import Environment, PackageLoader, StrictUndefined
    from markupsafe import Markup

    clock = BoardClock.of(rig, streams)
    levels = tables.visited_levels(events)
    stops = (rig.stops.low_rad * RAD_TO_DEG, rig.stops.high_rad * RAD_TO_DEG)
    theory = theory or averaged_curve(rig, result)
    chart = map_figure(result, theory, fit=fit or fitted_curve(result), stops_deg=stops)
    shown = _shown_taps(rig, result, streams, events, clock, levels, fit_tap)
    environment = Environment(
        loader=PackageLoader("rig.report", "."), autoescape=True, undefined=StrictUndefined, trim_blocks=True,
        lstrip_blocks=True,
    )  # fmt: skip
    template = environment.get_template("report.html.j2")
    style = Markup(template.environment.loader.get_source(environment, "report.css")[0])  # type: ignore[union-attr]
    time = np.asarray(streams.time_s, dtype=np.float64)
    return template.render(
        style=style,
        rig=rig,
        protocol=protocol,
        provenance=provenance,
        result=result,
        not_known=NOT_KNOWN,
        length=duration(float(time[-1] - time[0])) if len(time) > 1 else NOT_KNOWN,
        rows=len(time),
        cautions=CAUTIONS,
        headline=summary.headline(result),
        cards=(
            summary.boundary_card("falling", result.falling),
            summary.boundary_card("rising", result.rising),
        ),
        findings=summary.findings(result),
        theory_lines=summary.theory_lines(result),
        theory_drawn=theory is not None,
        expected_wrong=doubts.expected_wrong(result),
        map_svg=Markup(inline_svg(chart, "map", MAP_DESCRIPTION)),
        taps_shown=[_tap_view(tap, levels, number) for number, tap in enumerate(shown)],
        course_svg=Markup(
            inline_svg(course_figure(rig, result, streams, events, clock), "course", COURSE_DESCRIPTION)
        ),
        level_headings=tables.LEVEL_HEADINGS,
        level_rows=tables.level_rows(result.levels),
        tap_rows=tables.tap_rows(result, clock, levels),
        excluded=tables.excluded_lines(result),
        limits=protection.limit_lines(rig, result, streams),
        trips=protection.trip_lines(events, clock),
        notes=protection.note_lines(events, clock),
        tripped=any(event.kind == "trip" for event in events),
        loss_sentence=protection.loss_sentence(result, events),
        zero_sentence=protection.zero_sentence(events),
        doubts=doubts.limits_and_doubts(rig, result),
        methods=methods.METHODS,
        references=methods.REFERENCES,
        context=apparatus.context_facts(rig),
        constants=apparatus.constant_facts(rig),
        channels=apparatus.channel_lines(rig),
        end_stops=apparatus.end_stop_text(rig),
    )


def _brief(decay: Measured) -> str:
    return f"{value_text(decay)} {half_width_text(decay)} 1/s" if decay.value is not None else NOT_KNOWN


MAP_DESCRIPTION = (
    "Stability map: slow stiffness against flap rate squared, decay rate and mean angle against flap rate, "
    "each with 95 % intervals; the numbers are in the level table."
)
COURSE_DESCRIPTION = "Drive voltage, flap rate and body angle over the session, with levels and taps marked."


def _shown_taps(
    rig: RigDescription,
    result: SessionResult,
    streams: Streams,
    events: Sequence[Event],
    clock: BoardClock,
    levels: dict[int, tuple[float, str]],
    fit: Fit,
) -> list[ShownTap]:
    drives = {number: drive for number, (drive, _) in levels.items()}
    chosen = representative_taps(result, drives)
    ends = [clock.seconds(tap.tick) for tap in result.taps]
    ends += [clock.seconds(event.tick) for event in events if event.kind in ("level_end", "halt", "finished")]
    made = []
    for place, tap in chosen:
        until_s = min((end for end in ends if end > (tap.end_s or 0.0)), default=float("inf"))
        made.append(shown_tap(place, tap, rig, streams, clock, fit, until_s))
    return [tap for tap in made if tap is not None]


def _tap_view(shown: ShownTap, levels: dict[int, tuple[float, str]], number: int) -> dict[str, Any]:
    from markupsafe import Markup

    tap = shown.tap
    drive, direction = levels[tap.level]
    title = f"{shown.place}: tap {tap.tap}, {direction} level at {bare(drive, 4)} V"
    return {
        "title": title,
        "svg": Markup(inline_svg(tap_figure(shown), f"tap{number}", title)),
        "decay": measured_text(tap.decay_per_s, "1/s"),
        "mode": measured_text(tap.mode_hz, "Hz"),
        "stiffness": measured_text(tap.stiffness_per_s2, "1/s²"),
        "residual": f"{bare(RAD_TO_DEG * shown.fit.residual_rms_rad, 2)} deg",
        "variations": [(name, _brief(decay)) for name, decay in shown.variations],
        "reason": sentence(tap.reason),
    }
