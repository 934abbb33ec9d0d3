"""The line on top: words and shapes of every state, at the width of a small screen."""

from __future__ import annotations

import pytest
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot
from told_runs import ToldRun, dressed, overlapping, settle

from rig.desk.model.run_model import PHASES, RunModel
from rig.desk.model.wording import PHASE_SHAPES, disk_words, link_words
from rig.desk.widgets.shapes import SHAPES
from rig.desk.widgets.status_line import NOTHING, StatusLine

#: 1280 less the halt strip.
WIDTH = 1280 - 156


def line(qtbot: QtBot, qapp: QApplication, model: RunModel) -> StatusLine:
    widget = StatusLine(dressed(qapp))
    qtbot.addWidget(widget)
    widget.set_names("boom", "first-sweep", "simulated bench")
    widget.refresh(model)
    widget.set_link(12.0, 1000.0)
    settle(qapp, widget, WIDTH, widget.sizeHint().height())
    return widget


def under_way() -> ToldRun:
    run = ToldRun()
    run.level("rising", 8.0)
    run.flap(28.7)
    run.standing(flap_hz=28.714, free_bytes=52_300_000_000, time_s=312.41)
    return run


def test_it_tells_how_the_run_stands(qtbot: QtBot, qapp: QApplication) -> None:
    widget = line(qtbot, qapp, under_way().model)
    assert (widget.phase.word, widget.phase.shape) == ("running", "right")
    told = [cell.value.full_text for cell in widget.cells]
    # 0.1 rad are 5.73 degrees.
    assert told == [
        "312.4 s",
        "28.71 Hz",
        "5.73°",
        "held",
        "first-sweep",
        "52 GB free",
        "steady, 12 ms, none lost",
    ]
    assert widget.link.caption.full_text == "link, 1000 rows/s"
    assert widget.names.caption.full_text == "rig boom"
    assert "simulated bench" in widget.names.value.toolTip()


def test_without_a_run_nothing_is_made_up(qtbot: QtBot, qapp: QApplication) -> None:
    widget = line(qtbot, qapp, RunModel())
    widget.set_link(None, None)
    assert widget.phase.word == "no run"
    assert [cell.value.full_text for cell in widget.cells[:4]] == [NOTHING] * 4
    assert widget.disk.value.full_text == "not known"
    assert widget.link.value.full_text == "no link"


def test_every_phase_has_a_word_and_a_shape_of_its_own() -> None:
    assert set(PHASE_SHAPES) == set(PHASES)
    assert set(PHASE_SHAPES.values()) <= set(SHAPES)
    assert len(set(PHASE_SHAPES.values())) == len(PHASES)


@pytest.mark.parametrize("phase", PHASES)
@pytest.mark.parametrize("theme", ["light", "dark"])
def test_every_phase_can_be_drawn_in_its_plate(
    qtbot: QtBot, qapp: QApplication, phase: str, theme: str
) -> None:
    model = under_way().model
    model.phase = phase
    widget = StatusLine(dressed(qapp, theme))
    qtbot.addWidget(widget)
    widget.refresh(model)
    settle(qapp, widget, WIDTH, 48)
    image = widget.phase.grab().toImage()
    right = image.width() - 5  # the ground, past the end of the word
    ground = image.pixelColor(right, image.height() // 2)
    assert all(image.pixelColor(right, y) == ground for y in range(8, image.height() - 8))
    assert any(image.pixelColor(x, image.height() // 2) != ground for x in range(5, image.width() - 5))
    assert widget.phase.word == PHASES[phase]


def test_only_the_names_are_ever_shortened(qtbot: QtBot, qapp: QApplication) -> None:
    """The widest of everything at once, at 1280 x 720."""
    run = under_way()
    run.event("loss", rows=123_456, frames=30)
    run.flap(28.7, "friction_held")
    run.model.phase = "waiting"
    widget = line(qtbot, qapp, run.model)
    margins = [{"cause": "loss", "value": 0.004, "limit": 0.01, "unit": "1"}]
    run.standing(run_state="waiting", free_bytes=840_000_000, margins=margins, time_s=4321.0, flap_hz=28.7)
    widget.set_names("a rig with a very long name indeed", "a protocol with a very long name indeed")
    widget.refresh(run.model)
    widget.set_link(112.0, 1000.0)
    settle(qapp, widget, WIDTH, widget.height())
    for cell in widget.cells:
        cut = cell.value.text() != cell.value.full_text
        assert cut == (cell is widget.names), cell.value.full_text
    assert "a protocol with a very long name indeed" in widget.names.value.toolTip()
    boxes = [part.geometry().getRect() for part in (widget.phase, *widget.cells)]
    assert not overlapping(boxes)
    assert boxes[-1][0] + boxes[-1][2] <= WIDTH


def test_little_disk_is_a_word_and_a_shape(qtbot: QtBot, qapp: QApplication) -> None:
    run = under_way()
    widget = line(qtbot, qapp, run.model)
    assert widget.disk.mark is not None and widget.disk.mark.isHidden()
    run.standing(free_bytes=999_000_000)
    widget.refresh(run.model)
    assert widget.disk.value.full_text == "999 MB, low"
    assert not widget.disk.mark.isHidden() and widget.disk.mark.shape == "warning"
    assert disk_words(1_000_000_000) == ("1.0 GB free", False)


def test_the_link_is_told_in_words() -> None:
    assert link_words(30.0, 0.0, 0) == ("disc", "steady", "30 ms, none lost")
    assert link_words(250.0, 0.0, 0)[:2] == ("half", "late")
    assert link_words(30.0, 0.001, 7) == ("struck", "losing rows", "30 ms, 7 lost")
    assert link_words(30.0, 0.0, 7)[1] == "steady"  # lost long ago
    assert link_words(5_000.0, 0.0, 0) == ("cross", "silent", "5000 ms, none lost")
    assert link_words(50_000.0, 0.0, 0)[2] == "50 s, none lost"
    assert link_words(None, 0.0, 0)[1] == "no link"
    assert {link_words(age, 0.0, 0)[0] for age in (None, 1.0, 300.0, 3000.0)} <= set(SHAPES)


def test_a_replay_cannot_be_mistaken_for_a_run(qtbot: QtBot, qapp: QApplication) -> None:
    run = under_way()
    widget = line(qtbot, qapp, run.model)
    widget.set_replay(True)
    widget.refresh(run.model)
    assert widget.phase.word == "REPLAY"
    assert not widget.link.isVisible() and not widget.disk.isVisible()
    assert widget.time.isVisible() and widget.time.value.full_text == "312.4 s"
    shown = [widget.phase.word, *(cell.value.full_text for cell in widget.cells if cell.isVisible())]
    assert not {"running", "ready", "ramping down"} & set(shown)
    widget.set_replay(False)
    assert widget.phase.word == "running" and widget.link.isVisible()
