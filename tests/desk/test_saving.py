"""What is kept of a plot: pictures that other programs read, and values that parse back to the numbers drawn."""

from __future__ import annotations

import math
import xml.etree.ElementTree as ElementTree
from pathlib import Path

import numpy as np
import pytest
from invented_plots import rig, stream, tap_picture
from PySide6.QtCore import QPoint, Qt
from PySide6.QtGui import QGuiApplication, QImage
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot
from test_map_view import run as map_run
from told_runs import ToldRun, dressed, settle

from rig.desk.model.trace_model import StoredSource
from rig.desk.theme import LIGHT
from rig.desk.widgets.map_view import MapView
from rig.desk.widgets.saving import PNG_SCALE, Column, NotWritten, SavablePlot, as_text, write_picture
from rig.desk.widgets.tap_view import TapView
from rig.desk.widgets.traces import TracesView

SVG = "{http://www.w3.org/2000/svg}"


def shown_traces(qapp: QApplication) -> TracesView:
    view = TracesView(dressed(qapp))
    source = StoredSource(stream(4000), rig())
    source.position_tick = (7000 + 3500) * 1000
    view.set_source(source)
    settle(qapp, view, 680, 280)
    view.tick()
    return view


def shown_tap(qapp: QApplication) -> TapView:
    view = TapView(dressed(qapp))
    made = ToldRun()
    made.level("rising", 8.0)
    made.tap()
    made.model.take({"picture": {"tap": tap_picture(0)}})
    settle(qapp, view, 340, 260)
    view.refresh(made.model)
    return view


def shown_map(qapp: QApplication) -> MapView:
    view = MapView(dressed(qapp))
    settle(qapp, view, 340, 260)
    view.refresh(map_run().model)
    return view


@pytest.fixture(params=[shown_traces, shown_tap, shown_map], ids=["traces", "tap", "map"])
def plot(request: pytest.FixtureRequest, qapp: QApplication, qtbot: QtBot) -> SavablePlot:
    made: SavablePlot = request.param(qapp)
    qtbot.addWidget(made)
    qapp.processEvents()
    return made


def parsed(text: str) -> dict[str, list[str]]:
    lines = [line.split("\t") for line in text.removesuffix("\n").split("\n")]
    assert len({len(line) for line in lines}) == 1, "every line has as many cells as the headers"
    return {header: [line[at] for line in lines[1:]] for at, header in enumerate(lines[0])}


# -- values --------------------------------------------------------------------------------------------


def test_copied_values_parse_back_to_the_numbers(plot: SavablePlot, qtbot: QtBot) -> None:
    plot.setFocus()
    qtbot.waitUntil(plot.hasFocus)
    QGuiApplication.clipboard().clear()
    qtbot.keyClick(plot, Qt.Key.Key_C, Qt.KeyboardModifier.ControlModifier)
    table = parsed(QGuiApplication.clipboard().text())
    columns = plot.values()
    assert list(table) == [column.header for column in columns] and len(columns) > 5
    for column in columns:
        cells = table[column.header][: len(column.values)]
        assert all(cell == "" for cell in table[column.header][len(column.values) :])
        for cell, value in zip(cells, column.values, strict=True):
            if value is None or isinstance(value, str):
                assert cell == (value or "")
            else:
                assert float(cell) == pytest.approx(float(value), rel=1e-9, abs=1e-12)


def test_every_number_has_its_unit(plot: SavablePlot) -> None:
    for column in plot.values():
        if len(column.values) and not isinstance(column.values[0], str):
            assert column.unit, column.name


def test_what_is_not_known_is_left_empty_and_cells_stay_cells() -> None:
    text = as_text(
        [
            Column("a", "s", [1.0, math.nan, None]),  # type: ignore[list-item]
            Column("b", "", ["x\ty", "two\nlines"]),
            Column("c", "1/s²", np.array([1e-12])),
        ]
    )
    assert text == "a (s)\tb\tc (1/s²)\n1\tx y\t1e-12\n\ttwo lines\t\n\t\t\n"
    assert as_text([]) == "\n"


# -- pictures ------------------------------------------------------------------------------------------


def test_a_saved_png_shows_the_plot(plot: SavablePlot, tmp_path: Path, qtbot: QtBot) -> None:
    with qtbot.waitSignal(plot.saved) as told:
        assert plot.save_to(tmp_path / "plot.png")
    assert told.args == [str(tmp_path / "plot.png")]
    image = QImage(str(tmp_path / "plot.png"))
    assert image.width() == round(PNG_SCALE * plot.body.width())
    colours = {image.pixelColor(x, y).name() for x in range(0, image.width(), 3) for y in range(0, 700, 3)}
    assert LIGHT.panel.lower() in colours and len(colours) > 20
    assert image.pixelColor(1, image.height() - 1).name().upper() == LIGHT.panel


def test_a_saved_svg_is_a_drawing_with_its_words(plot: SavablePlot, tmp_path: Path) -> None:
    assert plot.save_to(tmp_path / "plot.SVG")
    root = ElementTree.parse(tmp_path / "plot.SVG").getroot()
    assert root.tag == f"{SVG}svg"
    assert root.get("viewBox") == f"0 0 {plot.body.width()} {plot.body.height()}"
    words = " ".join("".join(node.itertext()) for node in root.iter(f"{SVG}text"))
    wanted = {"traces": "seconds since start", "tap": "residual (deg)", "map": "flap rate squared (Hz²)"}
    assert wanted[plot.file_name] in words
    lines = [node for tag in ("path", "polyline") for node in root.iter(f"{SVG}{tag}")]
    assert sum(len(node.get("d") or node.get("points") or "") for node in lines) > 600, "curves as lines"
    assert not list(root.iter(f"{SVG}image")), "a drawing, not a picture of one"


def test_a_file_is_whole_or_as_it_was(plot: SavablePlot, tmp_path: Path, qtbot: QtBot) -> None:
    missing = tmp_path / "none" / "plot.png"
    with qtbot.waitSignal(plot.failed) as told:
        assert not plot.save_to(missing)
    assert told.args[0].startswith(f"{missing} cannot be written: ") and "\n" not in told.args[0]
    kept = tmp_path / "plot.txt"
    kept.write_text("as it was", encoding="utf-8")
    with pytest.raises(NotWritten, match=r"plot\.txt is neither \.png nor \.svg"):
        write_picture(plot, kept, LIGHT.panel)
    assert kept.read_text(encoding="utf-8") == "as it was"
    before = tmp_path / "plot.svg"
    before.write_text("old", encoding="utf-8")
    assert plot.save_to(before) and before.read_text(encoding="utf-8").startswith("<?xml")
    assert sorted(file.name for file in tmp_path.iterdir()) == ["plot.svg", "plot.txt"]


def test_asking_for_a_file_keeps_nothing_else_from_being_used(
    plot: SavablePlot, tmp_path: Path, qtbot: QtBot
) -> None:
    plot.folder = tmp_path
    plot.setFocus()
    qtbot.waitUntil(plot.hasFocus)
    qtbot.keyClick(plot, Qt.Key.Key_S, Qt.KeyboardModifier.ControlModifier)
    dialog = plot.dialog
    assert dialog is not None and dialog.isVisible() and not dialog.isModal()
    assert QApplication.activeModalWidget() is None
    dialog.selectFile(str(tmp_path / "named.svg"))
    with qtbot.waitSignal(plot.saved):
        dialog.accept()
    assert (tmp_path / "named.svg").is_file()
    assert plot.dialog is None


def test_the_menu_offers_both_with_their_keys(plot: SavablePlot) -> None:
    menu = plot.menu(QPoint(200, 100))
    keys = {action.text(): action.shortcut().toString() for action in menu.actions() if action.text()}
    assert keys["Save the picture …"] == "Ctrl+S" and keys["Copy the values"] == "Ctrl+C"


def test_the_focus_is_seen(plot: SavablePlot, qapp: QApplication, qtbot: QtBot) -> None:
    plot.clearFocus()
    qapp.processEvents()
    without = plot.grab().toImage()
    plot.setFocus()
    qtbot.waitUntil(plot.hasFocus)
    assert plot.grab().toImage().pixelColor(1, plot.height() // 2) != without.pixelColor(
        1, plot.height() // 2
    )
