"""Why a tap was left out: asked in the banner, answered by a digit or in other words, and never in the way."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import pytest
from PySide6.QtCore import Qt
from PySide6.QtWidgets import QApplication, QVBoxLayout, QWidget
from pytestqt.qtbot import QtBot
from told_runs import ToldRun, dressed, overlapping, settle

from rig.desk.model.wording import OTHER_WORDS, REASONS
from rig.desk.widgets.prompt_banner import PromptBanner
from rig.desk.widgets.reason_row import ReasonRow
from rig.run.inputs import MOST_LETTERS

CALL = "tap now, upward, gently, with the rod"
OTHER = len(REASONS)  # place of the button for other words
Tell = Callable[[ToldRun], ReasonRow]


class Asked:
    """A banner of the width it has in the smallest usual window, and what it has been answered."""

    def __init__(self, banner: PromptBanner) -> None:
        self.banner = banner
        self.host = QWidget()
        column = QVBoxLayout(self.host)
        column.setContentsMargins(0, 0, 0, 0)
        column.addWidget(banner)
        column.addStretch(1)
        self.heard: list[tuple[int, str]] = []
        banner.reason.connect(lambda tap, words: self.heard.append((tap, words)))

    @property
    def row(self) -> ReasonRow:
        return self.banner.why

    def tell(self, run: ToldRun) -> ReasonRow:
        self.banner.refresh(run.model)
        app = QApplication.instance()
        assert app is not None
        for _ in range(2):  # its height is asked for, then given
            app.processEvents()
        return self.row

    @property
    def buttons(self) -> list[str]:
        return [button.text() for button in self.row.buttons if button.isVisible()]


@pytest.fixture
def asked(qtbot: QtBot, qapp: QApplication) -> Iterator[Asked]:
    made = Asked(PromptBanner(dressed(qapp)))
    qtbot.addWidget(made.host)
    settle(qapp, made.host, 1280 - 156, 720)
    made.host.activateWindow()
    qtbot.waitActive(made.host)
    made.host.setFocus()
    yield made


def left_out(taps: int = 1) -> ToldRun:
    """A level whose last tap has been taken back."""
    run = ToldRun()
    run.level("rising", 8.0)
    run.flap(28.8)
    for _ in range(taps - 1):
        run.tap()
    run.tap("excluded", by="hand")
    return run


def test_nothing_is_asked_until_a_tap_has_been_left_out(asked: Asked, qtbot: QtBot) -> None:
    run = ToldRun()
    run.level("rising", 8.0)
    run.tap()
    assert asked.tell(run).tap is None and not asked.row.isVisible()
    qtbot.keyClick(asked.host, Qt.Key.Key_1)
    run.event("tap_excluded", tap=0, reason="rejected by the operator")
    assert asked.tell(run).tap == 0 and asked.row.question.full_text == "Tap 0: why?"
    assert asked.buttons == [f"{at} {words}" for at, words in enumerate((*REASONS, OTHER_WORDS), 1)]
    assert asked.row.accessibleName() == "why tap 0 was left out"
    assert [one.accessibleName() for one in asked.row.buttons][:1] == ["struck twice (1)"]
    assert asked.heard == []


@pytest.mark.parametrize("at", range(len(REASONS)))
@pytest.mark.parametrize("way", ["key", "pad", "mouse"])
def test_a_digit_or_a_press_answers_once(asked: Asked, qtbot: QtBot, at: int, way: str) -> None:
    run = left_out(3)
    row = asked.tell(run)
    for _ in range(2):  # the second finds nothing to answer
        if way == "mouse":
            qtbot.mouseClick(row.buttons[at], Qt.MouseButton.LeftButton)
        else:
            pad = Qt.KeyboardModifier.KeypadModifier if way == "pad" else Qt.KeyboardModifier.NoModifier
            qtbot.keyClick(asked.host, Qt.Key(Qt.Key.Key_1 + at), pad)
    assert asked.heard == [(2, REASONS[at])] and not row.isVisible()
    assert not asked.tell(run).isVisible()  # the bench has not answered yet
    run.event("tap_reason", tap=2, reason=REASONS[at])
    assert not asked.tell(run).isVisible()
    assert asked.banner.detail.full_text == f"Tap 2 excluded: {REASONS[at]}"


def test_the_row_goes_when_the_next_tap_is_judged_or_another_level_begins(asked: Asked) -> None:
    again, ended = left_out(), left_out()
    again.tap("observed")
    assert asked.tell(again).tap == 0
    assert asked.banner.detail.full_text == "Tap 1 under way" and asked.banner.buttons["redo"].isVisible()
    again.verdict(
        "tap",
        tap=1,
        level=0,
        returned=True,
        accepted=True,
        reason="returned",
        decay_per_s=0.8,
        decay_std_per_s=0.01,
    )
    assert asked.tell(again).tap is None
    ended.level_end()
    assert asked.tell(ended).tap == 0 and asked.banner.isVisible()
    assert asked.banner.detail.full_text == "Tap 0 excluded: rejected by the operator"
    ended.level("rising", 9.0)
    assert asked.tell(ended).tap is None and not asked.banner.isVisible()


def test_answered_with_nothing_else_to_say_the_banner_goes_at_once(asked: Asked, qtbot: QtBot) -> None:
    run = left_out()
    run.level_end()
    asked.tell(run)
    qtbot.keyClick(asked.host, Qt.Key.Key_2)
    assert asked.heard == [(0, REASONS[1])] and not asked.banner.isVisible()


def test_a_digit_after_the_next_tap_is_taken_back_is_not_for_the_one_before(
    asked: Asked, qtbot: QtBot
) -> None:
    """R or X has been pressed, and the bench has not told of it yet."""
    run = left_out()
    run.tap("observed")
    asked.tell(run)
    qtbot.keyClick(asked.host, Qt.Key.Key_X)
    qtbot.keyClick(asked.host, Qt.Key.Key_3)
    assert asked.heard == []
    run.event("tap_excluded", tap=1, reason="rejected by the operator")
    assert asked.tell(run).tap == 1
    qtbot.keyClick(asked.host, Qt.Key.Key_3)
    assert asked.heard == [(1, REASONS[2])]


def test_other_words_are_typed_and_no_key_of_the_banner_answers(asked: Asked, qtbot: QtBot) -> None:
    run = left_out()
    run.tap("observed")
    row = asked.tell(run)
    qtbot.keyClick(asked.host, Qt.Key.Key_6)
    assert row.line.hasFocus() and asked.buttons == []
    with qtbot.assertNotEmitted(asked.banner.redo), qtbot.assertNotEmitted(asked.banner.reject):
        qtbot.keyClicks(row.line, " 2 R X N  rods ")
    qtbot.keyClick(row.line, Qt.Key.Key_Return)
    assert asked.heard == [(0, "2 R X N rods")]
    assert not row.isVisible() and not row.line.hasFocus()
    with qtbot.waitSignal(asked.banner.reject):  # and the keys answer again
        qtbot.keyClick(asked.host, Qt.Key.Key_X)


def test_enter_takes_the_words_and_not_a_prompt_that_waits(asked: Asked, qtbot: QtBot) -> None:
    run = left_out()
    run.level_end()
    run.event("prompt", text="close the guard")
    row = asked.tell(run)
    assert asked.banner.buttons["done"].isVisible()
    qtbot.keyClick(asked.host, Qt.Key.Key_6)
    qtbot.keyClicks(row.line, "slipped")
    with qtbot.assertNotEmitted(asked.banner.acknowledged):
        qtbot.keyClick(row.line, Qt.Key.Key_Enter)
    assert asked.heard == [(0, "slipped")]
    with qtbot.waitSignal(asked.banner.acknowledged):
        qtbot.keyClick(asked.host, Qt.Key.Key_Enter)


@pytest.mark.parametrize("way", ["escape", "nothing typed", "button"])
def test_the_line_can_be_left(asked: Asked, qtbot: QtBot, way: str) -> None:
    row = asked.tell(left_out())
    qtbot.keyClick(asked.host, Qt.Key.Key_6)
    qtbot.keyClicks(row.line, "   " if way == "nothing typed" else "half a w")
    if way == "button":
        qtbot.mouseClick(row.leave_button, Qt.MouseButton.LeftButton)
    else:
        qtbot.keyClick(row.line, Qt.Key.Key_Escape if way == "escape" else Qt.Key.Key_Return)
    assert asked.heard == [] and not row.line.isVisible() and not row.line.hasFocus()
    assert len(asked.buttons) == OTHER + 1  # the offer stands
    qtbot.keyClick(asked.host, Qt.Key.Key_6)
    assert row.line.text() == ""


def test_what_is_being_typed_stays_and_goes_to_its_own_tap(asked: Asked, qtbot: QtBot) -> None:
    run = left_out()
    asked.tell(run)
    qtbot.keyClick(asked.host, Qt.Key.Key_6)
    qtbot.keyClicks(asked.row.line, "the cable")
    run.tap("excluded")  # by a press of its button
    row = asked.tell(run)
    assert row.tap == 0 and row.line.text() == "the cable" and row.line.hasFocus()
    qtbot.mouseClick(row.take_button, Qt.MouseButton.LeftButton)
    assert asked.heard == [(0, "the cable")]
    assert row.tap == 1 and len(asked.buttons) == OTHER + 1  # now the later one is asked about


def test_a_line_without_words_goes_with_its_offer(asked: Asked, qtbot: QtBot) -> None:
    run = left_out()
    asked.tell(run)
    qtbot.keyClick(asked.host, Qt.Key.Key_6)
    run.tap()
    row = asked.tell(run)
    assert row.tap is None and not row.line.hasFocus()  # R and X are keys again
    with qtbot.waitSignal(asked.banner.redo):
        qtbot.keyClick(asked.host, Qt.Key.Key_R)


@pytest.mark.parametrize("typing", [False, True])
def test_a_halt_a_trip_and_a_replay_ask_nothing(asked: Asked, qtbot: QtBot, typing: bool) -> None:
    run = left_out()
    asked.tell(run)
    if typing:
        qtbot.keyClick(asked.host, Qt.Key.Key_6)
        qtbot.keyClicks(asked.row.line, "the c")
    run.trip()
    run.event("waiting")
    row = asked.tell(run)
    assert row.tap is None and not row.isVisible() and not row.line.hasFocus()
    with qtbot.waitSignal(asked.banner.go_on):
        qtbot.keyClick(asked.host, Qt.Key.Key_G)
    run = left_out()
    assert asked.tell(run).tap == 0
    asked.banner.set_replay(True)
    assert asked.tell(run).tap is None and not asked.banner.isVisible()
    qtbot.keyClick(asked.host, Qt.Key.Key_1)
    assert asked.heard == []


def test_the_first_tap_of_a_second_run_is_asked_about_too(asked: Asked, qtbot: QtBot) -> None:
    for _ in range(2):
        asked.tell(ToldRun())
        asked.tell(left_out())
        qtbot.keyClick(asked.host, Qt.Key.Key_1)
    assert asked.heard == [(0, REASONS[0])] * 2


def test_every_word_offered_is_taken_as_it_is(asked: Asked) -> None:
    from rig.run.inputs import cleaned

    assert all(words == cleaned(words) and len(words) <= MOST_LETTERS for words in REASONS)
    assert asked.row.line.maxLength() == MOST_LETTERS
    assert len(REASONS) < 9  # one digit each, and one for other words


@pytest.mark.parametrize("theme", ["light", "dark"])
@pytest.mark.parametrize("width", [1280 - 156, 1024 - 156])
def test_nothing_is_cut(asked: Asked, qapp: QApplication, theme: str, width: int) -> None:
    asked.banner.set_theme(dressed(qapp, theme))
    settle(qapp, asked.host, width, 640)
    assert asked.host.width() == width
    run = left_out()
    run.tap("observed")
    run.model.take({"prompt": CALL})
    heights = set()
    for typing in (False, True):
        row = asked.tell(run)
        if typing:
            row.buttons[OTHER].click()
            row = asked.tell(run)
        edits = [row.line, row.take_button, row.leave_button]
        parts: list[QWidget] = edits if typing else [*row.buttons]
        assert not overlapping([part.geometry().getRect() for part in [*parts, row.question]])
        for part in parts:
            assert row.rect().contains(part.geometry())
            assert part.height() >= part.sizeHint().height() >= 24  # WCAG 2.2, 2.5.8
            if part is not row.line:
                assert part.width() >= part.sizeHint().width()
            assert part.accessibleName()
        assert asked.banner.rect().contains(row.geometry())
        heights.add(asked.banner.height())
    assert len(heights) == 1 and heights.pop() < 640 / 3  # the plots below do not move for what is typed
