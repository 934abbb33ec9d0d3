"""What is asked of the operator: the words, their size, and the buttons and keys that answer."""

from __future__ import annotations

import pytest
from PySide6.QtCore import Qt
from PySide6.QtWidgets import QApplication, QLineEdit, QVBoxLayout, QWidget
from pytestqt.qtbot import QtBot
from told_runs import ToldRun, dressed, overlapping, settle

from rig.desk.model.run_model import RunModel
from rig.desk.widgets.prompt_banner import (
    HEADING_POINTS,
    LEAST_POINTS,
    MOST_LINES,
    STILL_TURNING,
    PromptBanner,
)

WIDTH = 1280 - 156
CALL = "tap now, upward, gently, with the rod"
SIGNALS = {
    "done": "acknowledged",
    "redo": "redo",
    "reject": "reject",
    "enough": "enough",
    "go_on": "go_on",
    "end": "end",
}


class Host(QWidget):
    """A window of 1280 x 720 less the halt strip, with the banner on top and a line to type into."""

    def __init__(self, banner: PromptBanner) -> None:
        super().__init__()
        self.banner = banner
        self.typed = QLineEdit()
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.addWidget(banner)
        column.addWidget(self.typed)
        column.addStretch(1)


@pytest.fixture
def host(qtbot: QtBot, qapp: QApplication) -> Host:
    made = Host(PromptBanner(dressed(qapp)))
    qtbot.addWidget(made)
    settle(qapp, made, WIDTH, 720)
    made.activateWindow()
    qtbot.waitActive(made)
    return made


def tell(host: Host, run: ToldRun | RunModel, qapp: QApplication) -> PromptBanner:
    host.banner.refresh(run.model if isinstance(run, ToldRun) else run)
    for _ in range(2):  # its height is asked for, then given
        qapp.processEvents()
    return host.banner


def offered(banner: PromptBanner) -> set[str]:
    return {name for name, button in banner.buttons.items() if button.isVisible()}


def at_a_level() -> ToldRun:
    run = ToldRun()
    run.level("rising", 8.0)
    run.flap(28.8)
    return run


def waiting() -> ToldRun:
    run = at_a_level()
    run.trip()
    run.event("turning", flap_hz=20.0)
    run.event("standstill", coast_s=1.0)
    run.event("waiting")
    return run


def test_it_is_hidden_while_nothing_is_asked(host: Host, qapp: QApplication) -> None:
    assert not tell(host, RunModel(), qapp).isVisible()
    assert not tell(host, at_a_level(), qapp).isVisible()


def test_a_prompt_waits_for_done(host: Host, qapp: QApplication, qtbot: QtBot) -> None:
    run = ToldRun()
    run.event("prompt", text="take the clamp off and step back")
    banner = tell(host, run, qapp)
    assert banner.isVisible()
    assert banner.heading.shown == "Take the clamp off and step back"
    assert offered(banner) == {"done"}
    assert banner.accessibleDescription() == "Take the clamp off and step back"
    with qtbot.waitSignal(banner.acknowledged):
        qtbot.mouseClick(banner.buttons["done"], Qt.MouseButton.LeftButton)
    run.event("acknowledged", text="", waited_s=1.0)
    assert not tell(host, run, qapp).isVisible()


def test_a_call_to_tap_is_not_acknowledged(host: Host, qapp: QApplication) -> None:
    run = at_a_level()
    run.model.take({"prompt": CALL})
    banner = tell(host, run, qapp)
    assert banner.heading.shown == "Tap now, upward, gently, with the rod"
    assert offered(banner) == set()
    run.tap("observed", by="hand")
    assert offered(tell(host, run, qapp)) == {"redo", "reject", "enough"}


def test_after_a_tap_it_can_be_taken_back(host: Host, qapp: QApplication) -> None:
    run = at_a_level()
    run.tap("double", by="hand")
    banner = tell(host, run, qapp)
    assert offered(banner) == {"redo", "reject", "enough"}
    assert not banner.heading.isVisible()
    assert banner.detail.full_text == "Tap 0 double hit: struck 2 times"
    assert banner.mark.shape == "twin"
    run.tap("excluded", by="hand")
    assert offered(tell(host, run, qapp)) == {"enough"}
    run.level_end()
    assert offered(tell(host, run, qapp)) == set()  # why it was left out may still be said
    run.level("rising", 9.0)
    assert not tell(host, run, qapp).isVisible()


def test_while_the_crank_turns_it_says_so_and_offers_nothing(host: Host, qapp: QApplication) -> None:
    run = at_a_level()
    run.tap()
    run.trip()
    run.event("turning", flap_hz=20.0)
    banner = tell(host, run, qapp)
    assert banner.heading.shown == STILL_TURNING
    assert banner.detail.full_text.startswith("Motor current 6.20 A")
    assert offered(banner) == set()


def test_after_a_trip_the_operator_goes_on_or_ends(host: Host, qapp: QApplication) -> None:
    run = waiting()
    banner = tell(host, run, qapp)
    assert banner.heading.shown == run.model.trips[-1].sentence
    assert offered(banner) == {"go_on", "end"}
    run.event("rearmed", by="somebody")
    assert not tell(host, run, qapp).isVisible()


def test_after_a_halt_by_hand_it_says_what_is_so(host: Host, qapp: QApplication) -> None:
    run = at_a_level()
    run.event("halt", how="coast", cause="operator")
    run.event("turning", flap_hz=20.0)
    run.event("waiting")
    banner = tell(host, run, qapp)
    assert banner.heading.shown == "Halted. The drive is off and the crank stands still."
    assert offered(banner) == {"go_on", "end"}


def test_a_replay_asks_nothing_and_no_key_answers(host: Host, qapp: QApplication, qtbot: QtBot) -> None:
    run = waiting()
    tell(host, run, qapp)
    host.banner.set_replay(True)
    assert not tell(host, run, qapp).isVisible()
    with qtbot.assertNotEmitted(host.banner.go_on), qtbot.assertNotEmitted(host.banner.end):
        qtbot.keyClick(host, Qt.Key.Key_G)
        qtbot.keyClick(host, Qt.Key.Key_E)
    host.banner.set_replay(False)
    assert offered(tell(host, run, qapp)) == {"go_on", "end"}


@pytest.mark.parametrize(
    ("key", "button"),
    [
        (Qt.Key.Key_Return, "done"),
        (Qt.Key.Key_Enter, "done"),
        (Qt.Key.Key_R, "redo"),
        (Qt.Key.Key_X, "reject"),
        (Qt.Key.Key_N, "enough"),
        (Qt.Key.Key_G, "go_on"),
        (Qt.Key.Key_E, "end"),
    ],
)
def test_keys_answer_only_what_is_offered(
    host: Host, qapp: QApplication, qtbot: QtBot, key: Qt.Key, button: str
) -> None:
    asking = ToldRun()
    asking.event("prompt", text="close the guard")
    tapped = at_a_level()
    tapped.tap()
    heard: list[str] = []
    for name, signal in SIGNALS.items():
        getattr(host.banner, signal).connect(lambda name=name: heard.append(name))
    host.setFocus()
    for run in (asking, tapped, waiting(), at_a_level()):
        banner = tell(host, run, qapp)
        heard.clear()
        qtbot.keyClick(host, key)
        assert heard == ([button] if button in offered(banner) else [])


def test_letters_that_are_typed_are_not_answers(host: Host, qapp: QApplication, qtbot: QtBot) -> None:
    run = at_a_level()
    run.tap()
    banner = tell(host, run, qapp)
    host.typed.setFocus()
    with qtbot.assertNotEmitted(banner.redo), qtbot.assertNotEmitted(banner.enough):
        qtbot.keyClicks(host.typed, "RNX")
    assert host.typed.text().upper() == "RNX"


LONG = (
    "fasten the clamp on the boom, take rod and hands out of the guard, close both doors of the guard, look that the "
    "lamp of the supply is lit, and tell whoever is in the room that the crank will turn"
)


@pytest.mark.parametrize(
    "text", [CALL, "clamp the boom and take the rod out of the way, then close the guard", LONG]
)
def test_letters_are_as_large_as_two_lines_allow(host: Host, qapp: QApplication, text: str) -> None:
    run = ToldRun()
    run.event("prompt", text=text)
    heading = tell(host, run, qapp).heading
    assert heading.shown.lower() == text.lower()
    assert LEAST_POINTS <= heading.points <= HEADING_POINTS
    assert heading._fits(heading.shown, heading.points, heading.width())
    if heading.points < HEADING_POINTS:
        assert not heading._fits(heading.shown, heading.points + 1.0, heading.width())
    if len(text) < 80:
        assert heading.points == HEADING_POINTS == 30.0
    assert heading.height() < 2.5 * MOST_LINES * heading.points  # pixels at 96 a inch: 1.33 a point


def test_a_text_that_does_not_fit_is_shortened_and_told_whole(host: Host, qapp: QApplication) -> None:
    run = ToldRun()
    run.event("prompt", text="word " * 120)
    heading = tell(host, run, qapp).heading
    assert heading.shown.endswith("…")
    assert heading.points == LEAST_POINTS
    assert heading.toolTip() == heading.text
    run.event("prompt", text="short")
    heading = tell(host, run, qapp).heading
    assert (heading.shown, heading.toolTip()) == ("Short", "")


def test_letters_grow_with_the_window(host: Host, qapp: QApplication) -> None:
    run = at_a_level()
    run.model.take({"prompt": CALL})
    tell(host, run, qapp)
    settle(qapp, host, 3600, 2160)
    tell(host, run, qapp)
    assert host.banner.heading.points == pytest.approx(2.5 * HEADING_POINTS)


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_nothing_is_cut_on_a_small_screen(host: Host, qapp: QApplication, theme: str) -> None:
    host.banner.set_theme(dressed(qapp, theme))
    call = at_a_level()
    call.tap("left_out", by="hand")
    call.model.take({"prompt": CALL})
    for run in (call, waiting()):
        banner = tell(host, run, qapp)
        parts = [banner.heading, *(button for button in banner.buttons.values() if button.isVisible())]
        assert not overlapping([part.geometry().getRect() for part in parts])
        for part in parts:
            assert banner.rect().contains(part.geometry())
        for name in offered(banner):
            button = banner.buttons[name]
            assert button.width() >= button.sizeHint().width()
            assert button.accessibleName() and button.accessibleDescription()
        assert banner.height() < 720 / 4
