"""The picture of a tap and the words beside it: what the analysis told, for taps with and without a fit."""

from __future__ import annotations

import gc
import sys

import numpy as np
import pytest
from invented_plots import boxes, measured, tap_picture
from PySide6.QtCore import Qt
from PySide6.QtGui import QFontMetrics
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot
from told_runs import ToldRun, dressed, overlapping, settle

from rig.desk.model.tap_model import number_words, tap_numbers, tap_page
from rig.desk.theme import DARK
from rig.desk.widgets.tap_view import NOTHING, TapView
from rig.results import Measured

FIRM = "\N{NO-BREAK SPACE}"


def run(outcomes: tuple[str, ...] = ("accepted", "double", "accepted")) -> ToldRun:
    """A level with taps, each with its picture."""
    made = ToldRun()
    made.level("falling", 8.4)
    made.flap(30.0)
    for outcome in outcomes:
        number = made.tap(outcome)
        if outcome != "observed":
            picture = tap_picture(
                number,
                fitted=outcome == "accepted",
                reason=made.model.tap(number).reason,  # type: ignore[union-attr]
                returned=outcome != "lost",
            )
            made.model.take({"picture": {"tap": picture}})
    made.verdict("level", level=0, state="held", regime="stable", decay_half_width_per_s=0.02)
    return made


@pytest.fixture
def view(qapp: QApplication, qtbot: QtBot) -> TapView:
    made = TapView(dressed(qapp))
    qtbot.addWidget(made)
    settle(qapp, made, 340, 260)
    return made


# -- the words -----------------------------------------------------------------------------------------


def test_a_tap_that_counts() -> None:
    page = tap_page(run().model, 2)
    assert page is not None and (page.number, page.place, page.count) == (2, 3, 3)
    assert page.level == "▼ falling 8.4 V, stable"
    assert page.decay.replace(FIRM, " ") == "0.800 ±0.020 1/s (95 %)"
    assert page.mode.replace(FIRM, " ") == "1.250 ±0.003 Hz (95 %)"
    assert page.returned == "returned" and page.missing == ""
    assert page.sentence == "Returned; counts for the decay rate."


def test_a_tap_without_a_fit_says_why() -> None:
    page = tap_page(run(("lost",)).model, 0)
    assert page is not None and page.curves is not None and not len(page.curves.model_deg)
    assert page.decay == page.mode == "not known"
    assert page.sentence == "Did not return; left out of the decay rate."
    assert page.missing == "no fit: did not return" and page.returned == "did not return"


def test_a_tap_taken_back_says_so_whatever_the_fit() -> None:
    made = run(("accepted",))
    made.event("tap_excluded", tap=0, reason="struck by the cable")
    page = tap_page(made.model, 0)
    assert page is not None and page.outcome == "excluded"
    assert page.sentence == "Excluded by the operator: struck by the cable; left out of the decay rate."


def test_a_tap_still_watched_has_no_picture() -> None:
    model = run(("observed",)).model
    page = tap_page(model, 0)
    assert page is not None and page.curves is None and page.missing == "under observation"
    assert page.sentence.startswith("The body is watched")
    assert tap_page(model, 1) is None and tap_numbers(model) == [0]


def test_numbers_with_their_intervals() -> None:
    """Two digits of the standard uncertainty (JCGM 100:2008, 7.2.6), but no more decimals than can be read."""
    told = number_words(Measured(0.81234, 0.0321, 0.75, 0.9), "1/s", 3).replace(FIRM, " ")
    assert told == "0.812 1/s (0.750 to 0.900)"
    assert number_words(Measured.normal(0.7742, 0.00525), "1/s", 3).replace(FIRM, " ") == "0.774 ±0.010 1/s"
    assert number_words(Measured(), "1/s", 3) == "not known"
    assert number_words(Measured(1.5), "Hz", 3).replace(FIRM, " ") == "1.5 Hz"


# -- the picture ---------------------------------------------------------------------------------------


def test_before_the_first_tap(view: TapView) -> None:
    view.refresh(ToldRun().model)
    assert view.title.text() == NOTHING and view.values() == []
    assert not view.earlier.isEnabled() and not view.later.isEnabled()


def test_what_is_drawn_is_what_the_analysis_told(view: TapView) -> None:
    model = run().model
    view.refresh(model)
    told = model.pictures[2]
    assert view.title.text() == "Tap 2" and view.position.text() == "of 0 to 2"
    assert np.array_equal(view.rows.xs, told["time_s"])
    assert np.array_equal(view.rows.low, told["low_deg"]) and np.array_equal(view.rows.high, told["high_deg"])
    for curve, names in (
        (view.mean, ("mean_time_s", "mean_deg")),
        (view.fit, ("model_time_s", "model_deg")),
        (view.residual, ("model_time_s", "residual_deg")),
    ):
        for drawn, name in zip((curve.xs, curve.ys), names, strict=True):
            assert np.array_equal(drawn, told[name])
    (left, right), (low, high) = view.above.view.viewRange()
    assert (left, right) == pytest.approx((-0.6, 3.0))
    assert low < min(told["low_deg"]) and high > max(told["high_deg"])
    assert view.below.view.viewRange()[0] == pytest.approx([left, right])
    assert view.below.view.viewRange()[1] == pytest.approx([-0.115, 0.115], rel=0.01)
    used = view.used[0].rect()
    assert (used.left(), used.right()) == pytest.approx((told["from_s"], told["to_s"]))
    assert view.above.lines.marks == ((0.0, "tap"),)


def test_without_a_fit_nothing_of_the_last_one_is_left(view: TapView) -> None:
    made = run()
    view.refresh(made.model)
    view.show_tap(1)
    assert not len(view.fit.xs) and not len(view.residual.xs)
    assert view.used[0].rect().isEmpty() and view.below.words.text == "no fit"
    assert view.below.left.ticks == [] and "model" not in [entry.words for entry in view.key.entries]
    view.show_tap(2)
    assert len(view.fit.xs) and view.below.words.text == ""


def test_a_picture_that_comes_later_takes_the_place_of_the_word(view: TapView) -> None:
    made = run(("observed",))
    view.refresh(made.model)
    assert view.above.words.text == "under observation" and view.rows.path().isEmpty()
    made.model.take({"picture": {"tap": tap_picture(0)}})
    view.refresh(made.model)
    assert view.above.words.text == "" and not view.rows.path().isEmpty()


# -- choosing ------------------------------------------------------------------------------------------


def test_keys_go_through_the_taps_and_tell_which(view: TapView, qtbot: QtBot) -> None:
    told: list[int] = []
    view.chosen.connect(told.append)
    view.refresh(run().model)
    for key in (Qt.Key.Key_Left, Qt.Key.Key_Left, Qt.Key.Key_Left, Qt.Key.Key_Right, Qt.Key.Key_End):
        qtbot.keyClick(view, key)
    assert told == [1, 0, 1, 2]  # nothing lies before the first
    qtbot.keyClick(view, Qt.Key.Key_Home)
    assert told[-1] == 0 and view.title.text() == "Tap 0" and not view.earlier.isEnabled()


def test_buttons_do_the_same(view: TapView, qtbot: QtBot) -> None:
    view.refresh(run().model)
    assert view.earlier.isEnabled() and not view.later.isEnabled()
    with qtbot.waitSignal(view.chosen) as told:
        qtbot.mouseClick(view.earlier, Qt.MouseButton.LeftButton)
    assert told.args == [1] and view.position.text() == "of 0 to 2"


def test_a_new_tap_comes_to_the_front_and_news_of_an_old_one_do_not(view: TapView) -> None:
    made = run()
    view.refresh(made.model)
    view.show_tap(0)
    made.verdict("level", level=0, state="held", regime="undetermined", decay_half_width_per_s=0.02)
    view.refresh(made.model)
    assert view.title.text() == "Tap 0" and "undetermined" in view.level.full_text
    made.tap("observed")
    view.refresh(made.model)
    assert view.title.text() == "Tap 3"


# -- look ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("size", [(340, 260), (680, 420), (1020, 780)])
def test_nothing_is_cut_or_overlaps(
    size: tuple[int, int], view: TapView, qapp: QApplication, qtbot: QtBot
) -> None:
    made = run()
    made.model.pictures[2]["tap"]["reason"] = "returned, but " + "a long way round " * 3
    view.refresh(made.model)
    settle(qapp, view, *size)
    labels = [view.title, view.position, view.level, view.decay, view.mode, view.sentence, *view.names]
    for label in labels:
        needed = QFontMetrics(label.font())
        assert label.isVisible() and label.height() >= needed.height() - 1
        if not label.wordWrap():
            assert label.width() >= needed.horizontalAdvance(label.text()), label.text()
    assert view.decay.text() == view.decay.full_text, "shortened"
    assert view.sentence.height() >= view.sentence.heightForWidth(view.sentence.width())
    head = [view.title, view.outcome, view.earlier, view.position, view.later]
    assert not overlapping(boxes(view, head))
    parts = [view.canvas, view.key, *view.names, view.level, view.decay, view.mode, view.sentence]
    assert not overlapping(boxes(view, parts))
    inside = [(left, top, left + wide, top + tall) for left, top, wide, tall in boxes(view, [*head, *parts])]
    assert all(x0 >= 0 and y0 >= 0 and x1 <= size[0] and y1 <= size[1] for x0, y0, x1, y1 in inside)
    assert view.above.view.height() > 1.5 * view.below.view.height() > 30.0


def test_themes_change_every_colour(view: TapView) -> None:
    view.refresh(run().model)
    view.set_theme(DARK)
    assert view.fit.pen().color().name().upper() == DARK.fit
    assert view.mean.pen().color().name().upper() == DARK.mean
    assert view.rows.brush().color().name().upper() == DARK.trace
    assert view.accessibleDescription().startswith("accepted; decay rate 0.800")


def test_a_thousand_refreshes_leave_nothing_behind(view: TapView, qapp: QApplication) -> None:
    model = run().model

    def refresh(times: int) -> None:
        for at in range(times):
            view.show_tap(at % 3)
            view.refresh(model)
        qapp.processEvents()
        gc.collect()

    refresh(100)
    items, blocks = len(view.canvas.scene().items()), sys.getallocatedblocks()
    refresh(1000)
    assert len(view.canvas.scene().items()) == items
    assert sys.getallocatedblocks() - blocks < 2000


def test_values_have_units(view: TapView) -> None:
    view.refresh(run().model)
    columns = {column.header: column.values for column in view.values()}
    assert np.array_equal(columns["residual (deg)"], view.residual.ys)
    assert "time since the tap (s)" in columns and measured(1.0, 1.0)["low"] == 0.0
