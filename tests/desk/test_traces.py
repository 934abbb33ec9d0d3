"""Live signals: what is drawn is what came, nothing more is drawn than fits, and old pictures say that they are old."""

from __future__ import annotations

import gc
import sys
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from invented_plots import (
    FLAP_HZ,
    TICK_HZ,
    block,
    rig,
    ring,
)
from PySide6.QtCore import QPoint
from PySide6.QtGui import QFontMetricsF
from PySide6.QtWidgets import QApplication, QMenu
from pytestqt.qtbot import QtBot
from told_runs import dressed, settle

from rig.bench.ring import RingWriter
from rig.desk.model.trace_model import RingSource
from rig.desk.theme import DARK, LIGHT
from rig.desk.widgets import traces
from rig.desk.widgets.traces import SPANS_S, TracesView


@pytest.fixture
def writer(tmp_path: Path) -> Iterator[RingWriter]:
    made = ring(tmp_path / "ring")
    yield made
    made.close()


# -- the view ------------------------------------------------------------------------------------------


@pytest.fixture
def view(qapp: QApplication, qtbot: QtBot) -> TracesView:
    made = TracesView(dressed(qapp))
    qtbot.addWidget(made)
    settle(qapp, made, 680, 280)
    return made


@pytest.fixture
def live(view: TracesView, tmp_path: Path, writer: RingWriter) -> Iterator[TracesView]:
    source = RingSource(tmp_path / "ring", rig())
    view.set_source(source)
    writer.add(block(3000))
    view.tick()
    yield view
    source.close()


def words(view: TracesView) -> set[str]:
    return {chart.words.text for chart in view.charts.values()}


def test_what_is_drawn_is_what_the_source_tells(live: TracesView) -> None:
    assert live.source is not None
    found = live.source.latest(2.0, 600)
    assert found is not None and list(live.charts) == list(traces.FIRST)
    for measures, chart in live.charts.items():
        x, y = chart.course.xs, chart.course.ys
        trace = found.by[measures]
        assert np.array_equal(x[::2], trace.time_s) and np.array_equal(x[1::2], trace.time_s)
        assert np.array_equal(y[::2], trace.low) and np.array_equal(y[1::2], trace.high)
        (left, right), (low, high) = chart.view.viewRange()
        assert (left, right) == pytest.approx((found.now_s - 2.0, found.now_s))
        assert low <= trace.low.min() and trace.high.max() <= high
    mean = live.charts["body angle"].mean.ys
    assert found.mean is not None and np.array_equal(mean, found.mean.low)
    assert not len(live.charts["motor voltage"].mean.xs)
    assert words(live) == {""}


def test_no_more_is_drawn_than_there_are_columns(live: TracesView) -> None:
    for span_s in SPANS_S:
        live.choose_span(span_s)
        for chart in live.charts.values():
            assert 2 <= len(chart.course.xs) <= 4 * 800


def test_each_scale_names_its_unit(live: TracesView) -> None:
    names = [chart.left.name for chart in live.charts.values()]
    assert names == ["body angle (deg)", "drive (V)", "load (N)", "current (A)"]
    below = [chart.bottom for chart in live.charts.values() if chart.bottom is not None]
    assert [scale.name for scale in below] == ["seconds since start"]
    live.choose_span(0.0)
    assert below[0].name == "crank phase (deg)"
    assert [text for _, text in below[0].ticks] == [str(angle) for angle in range(0, 361, 45)]


def test_in_one_line_a_name_gives_way_to_its_unit(live: TracesView) -> None:
    left = next(iter(live.charts.values())).left
    names_px, metrics = left._names_px, QFontMetricsF(left._font)
    for name, unit in (
        ("body angle", "deg"),
        ("load", "N"),
        ("a name of many words", "mN m s"),
        ("crank", ""),
    ):
        left.set_name(name, unit)
        shown = left.in_one_line()
        assert metrics.horizontalAdvance(shown) <= names_px and shown.endswith(unit)
        assert shown == f"{name} {unit}".strip() or "…" in shown
    assert "…" not in shown  # the last one fits


def test_folded_signals_are_drawn_over_the_phase(live: TracesView) -> None:
    live.choose_span(0.0)
    load = live.charts["vertical load"]
    assert load.view.viewRange()[0] == pytest.approx([0.0, 360.0])
    phase, mean = load.mean.xs, load.mean.ys
    assert np.allclose(mean, np.cos(np.radians(phase)), atol=0.05)
    assert len(load.band.xs) and np.all(load.band.low <= load.band.high)
    assert not load.band.path().isEmpty()
    live.choose_span(2.0)
    assert load.band.path().isEmpty()


def test_lost_rows_leave_a_gap(live: TracesView, writer: RingWriter) -> None:
    writer.add(block(1000, 3500, lost=500))
    live.tick()
    connect = live.charts["vertical load"].course.connect
    x = live.charts["vertical load"].course.xs
    gaps = np.flatnonzero(~np.asarray(connect, dtype=bool)[:-1])
    assert len(gaps) == 1 and x[gaps[0]] < 3.0 < 3.5 <= x[gaps[0] + 1]


def test_a_picture_that_no_longer_moves_says_so(
    live: TracesView, writer: RingWriter, monkeypatch: pytest.MonkeyPatch
) -> None:
    live.tick()
    assert words(live) == {""}, "rows are not missed at once"
    monkeypatch.setattr(traces, "STALE_MS", -1)
    live.tick()
    (told,) = words(live)
    assert told.startswith("no new rows for")
    pale = live.charts["vertical load"].course.pen().color().name()
    assert pale.upper() == LIGHT.rule
    writer.add(block(10, 3000))
    live.tick()
    assert words(live) == {""}
    assert live.charts["vertical load"].course.pen().color().name().upper() == LIGHT.trace
    writer.close()
    live.tick()  # the last rows
    live.tick()
    assert words(live) == {""} and any(entry.words == "run ended" for entry in live.key.entries)


def test_without_rows_a_word_says_why(view: TracesView, tmp_path: Path) -> None:
    view.tick()
    assert words(view) == {"no run"}
    view.set_source(RingSource(tmp_path / "none", rig()))
    view.tick()
    assert words(view) == {"waiting for rows"}


def test_the_end_stops_are_lines_of_the_body(live: TracesView) -> None:
    stops = rig().stops
    across = live.charts["body angle"].lines.across
    assert [value for value, _ in across] == pytest.approx(
        [np.degrees(stops.low_rad), np.degrees(stops.high_rad)]
    )


def test_signals_can_be_left_out_and_taken_in(live: TracesView) -> None:
    menu = live.menu(QPoint(300, 60))
    actions = menu.actions()  # kept: some versions of the bindings let a submenu go with its action's wrapper
    assert "Hold the range of body angle" in [action.text() for action in actions]
    (signals,) = [action.menu() for action in actions if action.text() == "Signals shown"]
    assert isinstance(signals, QMenu)
    by_name = {action.text(): action for action in signals.actions()}
    by_name["flap rate"].trigger()
    assert list(live.charts)[-1] == "flap rate"
    live.tick()
    y = live.charts["flap rate"].course.ys
    assert np.allclose(y, FLAP_HZ, rtol=0.005)
    live.show_signals(("motor current",))
    assert list(live.charts) == ["motor current"]


def test_buttons_choose_the_span_and_tell_it(live: TracesView, qtbot: QtBot) -> None:
    with qtbot.waitSignal(live.span_chosen) as told:
        live.spans.buttons()[2].click()
    assert told.args == [10.0] and live.span_s == 10.0
    assert [button.isChecked() for button in live.spans.buttons()] == [False, False, True, False, False]
    assert all(button.accessibleName() for button in live.spans.buttons())


def test_themes_change_every_colour(live: TracesView) -> None:
    live.set_theme(DARK)
    chart = live.charts["body angle"]
    assert chart.course.pen().color().name().upper() == DARK.trace
    assert chart.mean.pen().color().name().upper() == DARK.mean
    assert live.canvas.backgroundBrush().color().name().upper() == DARK.panel


def test_values_are_those_drawn(live: TracesView) -> None:
    columns = {column.header: column.values for column in live.values()}
    course = live.charts["vertical load"].course
    x, y = course.xs, course.ys
    assert np.array_equal(columns["time of load (s)"], x[::2])
    assert np.array_equal(columns["load greatest (N)"], y[1::2])
    assert len(columns["cycle mean (deg)"]) == len(live.charts["body angle"].mean.xs)
    live.choose_span(0.0)
    assert "crank phase of load (deg)" in {column.header for column in live.values()}


def test_a_thousand_frames_leave_nothing_behind(
    live: TracesView, writer: RingWriter, qapp: QApplication
) -> None:
    def draw(frames: int) -> None:
        for _ in range(frames):
            nonlocal done
            writer.add(block(33, done))
            done += 33
            live.tick()
        qapp.processEvents()
        gc.collect()

    done = 3000
    draw(200)
    items, blocks = len(live.canvas.scene().items()), sys.getallocatedblocks()
    draw(1000)
    assert len(live.canvas.scene().items()) == items
    assert sys.getallocatedblocks() - blocks < 2000  # a frame that kept one object would keep 1000
    assert TICK_HZ == 1_000_000 and live.newest == done - 1
