"""Charts of signals are made once: others are shown in their place, and come back as they were."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from invented_plots import block, rig, ring
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot
from told_runs import dressed, settle

from rig.desk.model.trace_model import RingSource
from rig.desk.widgets.traces import FIRST, TracesView


@pytest.fixture
def path(tmp_path: Path) -> Iterator[Path]:
    """A ring with the rows of some seconds."""
    writer = ring(tmp_path / "ring")
    writer.add(block(3000))
    yield tmp_path / "ring"
    writer.close()


@pytest.fixture
def view(qapp: QApplication, qtbot: QtBot, path: Path) -> Iterator[TracesView]:
    made, source = TracesView(dressed(qapp)), RingSource(path, rig())
    qtbot.addWidget(made)
    made.set_source(source)
    settle(qapp, made, 680, 280)
    made.tick()
    yield made
    source.close()


def places(view: TracesView) -> dict[str, tuple[float, float, float, float]]:
    view.canvas.ci.layout.activate()
    return {
        name: chart.view.mapRectToScene(chart.view.boundingRect()).getRect()
        for name, chart in view.charts.items()
    }


def test_no_chart_is_made_for_a_signal_that_had_one(view: TracesView, qapp: QApplication) -> None:
    before, where = dict(view.charts), places(view)
    view.show_signals(("motor current",))
    settle(qapp, view, 680, 280)
    (alone,) = places(view).values()
    assert view.charts["motor current"] is before["motor current"]
    assert not before["body angle"].view.isVisible()
    assert alone[3] > 3.0 * where["motor current"][3]  # those hidden leave their room to it
    view.show_signals(FIRST)
    settle(qapp, view, 680, 280)
    assert all(view.charts[name] is before[name] for name in FIRST) and places(view) == where


def test_the_seconds_stand_under_the_last_chart(view: TracesView, qapp: QApplication) -> None:
    for shown in (("body angle",), ("body angle", "flap rate"), FIRST):
        view.show_signals(shown)
        view.tick()
        assert [name for name, chart in view.charts.items() if chart.bottom is not None] == [shown[-1]]
        bottom = view.charts[shown[-1]].bottom
        assert bottom is not None and bottom.ticks and bottom.name == "seconds since start"


def test_another_source_begins_with_nothing(view: TracesView, path: Path) -> None:
    charts = dict(view.charts)
    assert all(len(chart.course.xs) for chart in charts.values())
    charts["body angle"].held = True
    view.set_source(None)
    assert not any(len(chart.course.xs) or chart.held or chart.left.ticks for chart in charts.values())
    assert charts["body angle"].lines.across == ()
    source = RingSource(path, rig())
    view.set_source(source)
    view.tick()
    source.close()
    assert view.charts == charts and all(len(chart.course.xs) for chart in charts.values())
