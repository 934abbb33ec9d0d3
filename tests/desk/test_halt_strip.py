"""The halt control: one press of anything, on the press, whether the drive may be on or not."""

from __future__ import annotations

from itertools import pairwise

import pytest
from PySide6.QtCore import QPoint, QRectF, Qt
from PySide6.QtGui import QFontMetricsF
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot
from told_runs import ToldRun, differing_pixels, dressed, settle

from rig.desk.model.run_model import RunModel
from rig.desk.theme import THEMES
from rig.desk.widgets.halt_strip import DOES, FOOT, KEYS, OFF, STILL_TURNING, WORD, HaltStrip


def strip(
    qtbot: QtBot, qapp: QApplication, model: RunModel, theme: str = "light", height: int = 720
) -> HaltStrip:
    widget = HaltStrip(dressed(qapp, theme))
    qtbot.addWidget(widget)
    widget.refresh(model)
    widget.resize(100, height)
    settle(qapp, widget, widget.sizeHint().width(), height)
    return widget


def running() -> RunModel:
    return ToldRun().model


@pytest.mark.parametrize("button", [Qt.MouseButton.LeftButton, Qt.MouseButton.RightButton])
def test_it_halts_on_the_press_not_on_the_release(
    qtbot: QtBot, qapp: QApplication, button: Qt.MouseButton
) -> None:
    widget = strip(qtbot, qapp, running())
    heard: list[int] = []
    widget.halted.connect(lambda: heard.append(1))
    qtbot.mousePress(widget, button, pos=QPoint(3, 3))
    assert heard == [1]
    qtbot.mouseRelease(widget, button, pos=QPoint(3, 3))
    assert heard == [1]


@pytest.mark.parametrize("key", [Qt.Key.Key_Space, Qt.Key.Key_Return, Qt.Key.Key_Enter])
def test_it_halts_by_key(qtbot: QtBot, qapp: QApplication, key: Qt.Key) -> None:
    widget = strip(qtbot, qapp, running())
    heard: list[int] = []
    widget.halted.connect(lambda: heard.append(1))
    qtbot.keyPress(widget, key)
    assert heard == [1]
    qtbot.keyRelease(widget, key)
    assert heard == [1]


def test_a_second_press_halts_again(qtbot: QtBot, qapp: QApplication) -> None:
    widget = strip(qtbot, qapp, running())
    heard: list[int] = []
    widget.halted.connect(lambda: heard.append(1))
    qtbot.mouseClick(widget, Qt.MouseButton.LeftButton)
    qtbot.mouseDClick(widget, Qt.MouseButton.LeftButton)  # the second press of a double click
    assert heard == [1, 1]
    widget.click()  # as a screen reader does
    assert heard == [1, 1, 1]


def test_with_nothing_driven_it_is_quiet_but_can_be_pressed(qtbot: QtBot, qapp: QApplication) -> None:
    widget = strip(qtbot, qapp, RunModel())
    assert (widget.live, widget.told) == (False, OFF)
    assert widget.isVisible() and widget.isEnabled()
    with qtbot.waitSignal(widget.halted):
        qtbot.mousePress(widget, Qt.MouseButton.LeftButton)


def test_what_it_says_follows_the_run(qtbot: QtBot, qapp: QApplication) -> None:
    run = ToldRun()
    widget = strip(qtbot, qapp, run.model)
    assert (widget.live, widget.told) == (True, DOES)
    run.event("halt", how="coast", cause="operator")
    widget.refresh(run.model)
    assert widget.told == DOES  # ramping down still: the drive may be on
    run.event("turning", flap_hz=12.0)
    widget.refresh(run.model)
    assert (widget.live, widget.told) == (False, STILL_TURNING)
    run.event("finished", exit_code=3, reason="halted by the operator")
    widget.refresh(run.model)
    assert widget.told == OFF
    assert OFF in widget.accessibleDescription() and FOOT in widget.accessibleDescription()


@pytest.mark.parametrize("height", [560, 720, 1080, 2160])
def test_every_text_has_its_place(qtbot: QtBot, qapp: QApplication, height: int) -> None:
    widget = strip(qtbot, qapp, running(), height=height)
    if height == 720:
        assert 130 <= widget.width() <= 170
    parts = widget.parts()
    order = [*(str(at) for at in range(len(WORD))), "told", "keys", "foot"]
    for above, below in pairwise(order):
        assert parts[above].bottom() <= parts[below].top() + 0.5, (above, below)
    inside = QRectF(widget.rect())
    letters = widget.letter_font(parts)
    metrics = QFontMetricsF(letters)
    for name in order:
        assert inside.contains(parts[name]), name
    for at, letter in enumerate(WORD):
        assert metrics.horizontalAdvance(letter) <= parts[str(at)].width()
        assert metrics.capHeight() <= parts[str(at)].height()
    if height >= 720:  # the largest thing on the screen
        assert metrics.capHeight() >= 0.1 * min(height, 1100)
    for name, text, font in (
        ("told", DOES, widget._told_font()),
        ("told", STILL_TURNING, widget._told_font()),
        ("keys", KEYS, widget._keys_font()),
        ("foot", FOOT, widget._foot_font()),
    ):
        words = [QFontMetricsF(font).horizontalAdvance(word) for word in text.split()]
        assert max(words) <= parts[name].width(), text
        assert widget._height(text, font, parts[name].width()) <= parts[name].height() + 1.0, text


@pytest.mark.parametrize("theme", THEMES)
def test_live_and_quiet_look_different(qtbot: QtBot, qapp: QApplication, theme: str) -> None:
    ground = THEMES[theme].halt
    live = strip(qtbot, qapp, running(), theme)
    live.setAttribute(Qt.WidgetAttribute.WA_UnderMouse, False)
    live.clearFocus()
    filled = 1.0 - differing_pixels(live, ground)
    quiet = strip(qtbot, qapp, RunModel(), theme)
    assert 1.0 - differing_pixels(quiet, ground) < 0.01
    assert filled > 0.5
