"""What the figures show, read back from the drawn artists."""

import math
from dataclasses import replace

import numpy as np
import pytest
from invented_session import Invented

from analysis.boundary.form import FittedForm, RigConstants
from rig.report import MapCurve, fitted_curve, form_points, map_figure
from rig.report.course import level_spans
from rig.report.curves import straight_fit
from rig.report.palette import DIRECTION_COLOUR
from rig.report.tapfit import representative_taps, shown_tap
from rig.report.timing import BoardClock
from rig.report.trace import bin_starts, binned, flap_course
from rig.results import Boundary, Finding, Measured, SessionResult, Theory


def test_every_level_with_stiffness_is_a_point(short_session: Invented) -> None:
    figure = map_figure(short_session.result, short_session.theory, stops_deg=(-4.0, 30.0))
    axes = figure.axes[0]
    drawn = {
        (float(line.get_xdata()[0]), float(line.get_ydata()[0]))  # type: ignore[index,arg-type]
        for line in axes.lines
        if line.get_marker() in ("v", "^", "x") and len(line.get_xdata()) == 1  # type: ignore[arg-type]
    }
    for level in short_session.result.levels:
        if level.stiffness_per_s2.value is not None and level.flap_hz.value is not None:
            assert (level.flap_hz.value**2, level.stiffness_per_s2.value) in drawn


def test_directions_differ_in_shape_not_only_in_colour(short_session: Invented) -> None:
    axes = map_figure(short_session.result).axes[0]
    shapes = {line.get_color(): line.get_marker() for line in axes.lines if line.get_marker() in ("v", "^")}
    assert shapes[DIRECTION_COLOUR["falling"]] == "v"
    assert shapes[DIRECTION_COLOUR["rising"]] == "^"


def test_boundary_band_is_its_interval(short_session: Invented) -> None:
    axes = map_figure(short_session.result).axes[1]
    bands = {tuple(np.round(patch.get_extents().intervalx, 6)) for patch in _bands(axes)}
    inverse = axes.transData.inverted()
    spans = {tuple(np.round([inverse.transform((x, 0.0))[0] for x in band], 3)) for band in bands}
    assert (25.829, 25.923) in spans
    assert (27.0, 30.6) in spans


def _bands(axes):  # type: ignore[no-untyped-def]
    axes.figure.draw_without_rendering()
    return [patch for patch in axes.patches if patch.get_window_extent().height > 10.0]


def test_map_of_nothing_can_be_drawn() -> None:
    nowhere, none = Boundary("not_located"), Finding("not_testable", "")
    figure = map_figure(SessionResult((), (), nowhere, nowhere, none, none, none, Theory()))
    figure.draw_without_rendering()
    assert len(figure.axes) == 3


def test_straight_fit_passes_through_levels_that_lie_on_a_line(short_session: Invented) -> None:
    slope, start = 0.35, -222.0
    levels = tuple(
        replace(level, stiffness_per_s2=Measured.normal(start + slope * level.flap_hz.value**2, 1.0))
        for level in short_session.result.levels
        if level.state == "held" and level.flap_hz.value is not None
    )
    found = Finding("supported", "", {"slope": Measured.normal(slope, 0.01)})
    fit = straight_fit(replace(short_session.result, levels=levels, vibration=found))
    assert fit is not None
    np.testing.assert_allclose(fit.stiffness_per_s2, start + slope * fit.flap_hz**2, rtol=1e-9)


def test_fitted_form_comes_before_the_straight_line(short_session: Invented) -> None:
    # A pitchfork without bias in closed form: kappa = K (x - 1), x = (f / fc)^2, angle constant.
    form = FittedForm(25.0, 0.0, 150.0, math.radians(2.0), 1.0, 0.5, RigConstants())
    points = form_points(form, 40.0)
    curve = fitted_curve(replace(short_session.result, fit_curve=points))
    assert curve is not None and curve.mean_angle_deg is not None
    assert 25.0 <= curve.flap_hz[0] < 25.01 and curve.flap_hz[-1] == 40.0
    np.testing.assert_allclose(curve.stiffness_per_s2, 150.0 * ((curve.flap_hz / 25.0) ** 2 - 1.0), atol=1e-6)
    np.testing.assert_allclose(curve.mean_angle_deg, 2.0, atol=1e-6)
    drawn = map_figure(short_session.result, None, fit=curve).axes[2]
    assert any(np.array_equal(line.get_xdata(), curve.flap_hz) for line in drawn.lines)


def test_no_slope_no_fit(short_session: Invented) -> None:
    assert straight_fit(replace(short_session.result, vibration=Finding("not_testable", ""))) is None


def test_theory_is_labelled(short_session: Invented) -> None:
    theory = MapCurve("averaged theory", np.array([26.0, 40.0]), np.array([10.0, 300.0]))
    figure = map_figure(short_session.result, theory)
    assert "averaged theory" in [text.get_text() for text in figure.legends[0].get_texts()]


def test_bins_keep_extremes_and_means() -> None:
    time = np.arange(1000) / 1000.0
    values = np.zeros(1000)
    values[437], values[438] = 9.0, -7.0
    part = binned(time, values, 50)
    assert part.high.max() == 9.0
    assert part.low.min() == -7.0
    assert math.isclose(float(np.sum(part.mean) * 20), values.sum(), abs_tol=1e-12)


@pytest.mark.parametrize("rows", [1, 2, 7, 50, 51, 999])
def test_bins_are_never_empty(rows: int) -> None:
    sizes = np.diff(np.append(bin_starts(rows, 50), rows))
    assert sizes.min() >= 1
    assert sizes.sum() == rows


def test_flap_rate_of_a_steady_crank() -> None:
    time = np.arange(5000) / 1000.0
    _, rate = flap_course(time, 2.0 * np.pi * 31.7 * time, 40)
    np.testing.assert_allclose(rate, 31.7, rtol=1e-9)


def test_levels_end_where_the_next_begins_or_the_run_is_halted(short_session: Invented) -> None:
    clock = BoardClock.of(short_session.rig, short_session.streams)
    spans = level_spans(short_session.events, clock)
    assert [number for number, _, _ in spans] == list(range(6))
    assert all(end > start for _, start, end in spans)
    cut = level_spans([event for event in short_session.events if event.kind != "level_end"], clock)
    assert [number for number, _, _ in cut] == list(range(6))


def test_shown_tap_is_fitted_in_its_own_interval(short_session: Invented) -> None:
    drives = {
        event.data["level"]: event.data["drive_v"] for event in short_session.events if event.kind == "level"
    }
    chosen = representative_taps(short_session.result, drives)
    assert [place for place, _ in chosen] == ["Near the edge", "Far above the edge"]
    assert drives[chosen[0][1].level] < drives[chosen[1][1].level]
    clock = BoardClock.of(short_session.rig, short_session.streams)
    for place, tap in chosen:
        shown = shown_tap(place, tap, short_session.rig, short_session.streams, clock)
        assert shown is not None
        # The invented body decays at 0.75 + 0.005 f by construction.
        flap = 3.6 * drives[tap.level]
        assert abs(shown.fit.decay_per_s - (0.75 + 0.005 * flap)) < 5.0 * shown.fit.decay_std_per_s + 0.02
        assert len(shown.variations) == 4
