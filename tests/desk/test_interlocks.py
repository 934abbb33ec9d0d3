"""Each limit with its margin, what tripped, and what must happen before arming again."""

from __future__ import annotations

from typing import Any

import pytest
from PySide6.QtGui import QFontMetricsF
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot
from told_runs import ToldRun, dressed, overlapping, settle

from rig.desk.model.run_model import RunModel, Tripped
from rig.desk.model.wording import LIMIT_WORDS, margin_words, trip_words, used_share
from rig.desk.widgets.interlocks import MOST_NOTES, InterlockView
from rig.run.interlocks import WHAT_NOW, Margin

MARGINS = (
    Margin("current", 0.954, 6.0, "A"),
    Margin("winding", 99.0, 110.0, "degC"),
    Margin("voltage", 9.01, 13.0, "V"),
    Margin("flap_rate", 32.21, 60.0, "Hz"),
    Margin("travel", -13.2, 15.0, "deg"),
    Margin("load", 7.4, 140.0, "N"),
    Margin("loss", 0.0093, 0.01, "1"),
)


def told(margins: tuple[Margin, ...] = MARGINS) -> list[dict[str, Any]]:
    """As a bench process tells them."""
    return [vars(margin) for margin in margins]


def view(qtbot: QtBot, qapp: QApplication, model: RunModel, height: int = 640) -> InterlockView:
    widget = InterlockView(dressed(qapp))
    qtbot.addWidget(widget)
    settle(qapp, widget, 220, height)
    widget.refresh(model)
    qapp.processEvents()
    return widget


def test_every_cause_of_a_trip_has_words() -> None:
    assert set(LIMIT_WORDS) == set(WHAT_NOW)


def test_margins_are_told_with_value_limit_and_unit() -> None:
    assert [margin_words(margin) for margin in told()] == [
        ("current", "0.95 of 6 A", ""),
        ("winding", "99 of 110 °C", "near"),
        ("voltage", "9.0 of 13 V", ""),
        ("flap rate", "32 of 60 Hz", ""),
        ("travel", "-13.2 of 15°", "near"),
        ("load", "7 of 140 N", ""),
        ("lost rows", "0.93 of 1 %", "near"),
    ]


@pytest.mark.parametrize(("value", "word"), [(4.79, ""), (4.81, "near"), (5.99, "near"), (6.01, "over")])
def test_from_80_percent_on_a_limit_is_called_near(value: float, word: str) -> None:
    margin = Margin("current", value, 6.0, "A")
    assert margin_words(vars(margin))[2] == word
    assert used_share(vars(margin)) == pytest.approx(margin.used)


def test_a_small_value_has_no_stray_sign() -> None:
    assert margin_words(vars(Margin("travel", -0.001, 15.0, "deg")))[1] == "0.0 of 15°"


@pytest.mark.parametrize("cause", WHAT_NOW)
def test_a_trip_says_once_what_must_happen_before_arming_again(cause: str) -> None:
    sentence = f"Something happened at 1.234 s; drive off (coast): {WHAT_NOW[cause]}."
    what, then = trip_words(Tripped(0, cause, sentence))
    assert what == "Something happened at 1.234 s; drive off (coast)."
    assert then.startswith("Before arming again: ") and then.endswith(".")
    assert WHAT_NOW[cause].split(" before arming")[0].split(", then arm")[0].split(" and arm")[0] in then
    assert then.lower().count("arming again") + then.lower().count("arm again") == 1


def test_a_trip_of_another_cause_is_told_as_it_is() -> None:
    what, then = trip_words(Tripped(0, "other", "Something else."))
    assert what == "Something else."
    assert then == "Before arming again: find out why at the bench."


def test_without_a_run_it_says_that_nothing_is_watched(qtbot: QtBot, qapp: QApplication) -> None:
    widget = view(qtbot, qapp, RunModel())
    assert not widget.rows
    assert widget.no_limits.isVisible() and widget.no_trip.isVisible()
    assert not widget.notes.isVisible()


def test_rows_follow_the_margins(qtbot: QtBot, qapp: QApplication) -> None:
    run = ToldRun()
    run.standing(margins=told())
    widget = view(qtbot, qapp, run.model)
    assert [row.name for row in widget.rows] == [margin_words(margin)[0] for margin in told()]
    assert widget.rows[1].word == "near"
    assert widget.rows[1].share == pytest.approx(0.9)
    assert "90 % of the limit is used" in widget.rows[1].accessibleDescription()
    before = widget.rows[0].grab().toImage()
    run.standing(margins=told((Margin("current", 5.9, 6.0, "A"), *MARGINS[1:])))
    widget.refresh(run.model)
    assert widget.rows[0].told == "5.90 of 6 A"
    assert widget.rows[0].grab().toImage() != before
    run.standing(margins=told(MARGINS[:2]))
    widget.refresh(run.model)
    assert len(widget.rows) == 2


@pytest.mark.parametrize("value", [5.0, 6.5])
def test_texts_of_a_row_do_not_overlap_in_220_pixels(qtbot: QtBot, qapp: QApplication, value: float) -> None:
    run = ToldRun()
    margins = tuple(Margin(one.cause, value / 6.0 * one.limit, one.limit, one.unit) for one in MARGINS)
    run.standing(margins=told(margins))
    widget = view(qtbot, qapp, run.model)
    for row in widget.rows:
        texts = row.texts()
        assert not overlapping([place.getRect() for _, place, _ in texts])
        assert [text for text, _, _ in texts] == [row.told, row.word, row.name]  # nothing shortened
        for text, place, font in texts:
            assert QFontMetricsF(font).horizontalAdvance(text) <= place.width() + 0.5
            assert place.left() >= 0.0 and place.right() <= row.width() + 0.5
    assert not overlapping([row.geometry().getRect() for row in widget.rows])


def test_trips_are_cards_newest_first_and_go_when_armed_again(qtbot: QtBot, qapp: QApplication) -> None:
    run = ToldRun()
    run.trip("current")
    run.event("trip", cause="stall", sentence="The crank has not turned.", value=1.0, limit=0.5, halt="coast")
    widget = view(qtbot, qapp, run.model)
    assert [card.what.text() for card in widget.cards] == [
        "The crank has not turned.",
        "Motor current 6.20 A exceeded 6.00 A at 12.300 s; drive off (coast).",
    ]
    seconds = [run.model.seconds(trip.tick) for trip in run.model.trips]
    assert widget.cards[0].when.text() == f"Tripped at {seconds[1]:.3f} s"
    assert widget.cards[1].then.text() == (
        "Before arming again: check the crank for a jam and the wiring for a short."
    )
    assert not widget.no_trip.isVisible()
    for card in widget.cards:
        for label in (card.when, card.what, card.then):
            assert label.height() >= label.heightForWidth(label.width())
    run.event("turning", flap_hz=3.0)
    run.event("waiting")
    run.event("rearmed", by="somebody")
    widget.refresh(run.model)
    assert not widget.cards
    qapp.processEvents()
    assert widget.no_trip.isVisible()


def test_notes_come_newest_first_and_not_without_end(qtbot: QtBot, qapp: QApplication) -> None:
    run = ToldRun()
    for number in range(MOST_NOTES + 5):
        run.event("mark", text=f"note {number}")
    widget = view(qtbot, qapp, run.model)
    lines = widget.notes.text().splitlines()
    assert len(lines) == MOST_NOTES
    assert lines[0].endswith(f"s  note {MOST_NOTES + 4}")
    assert lines[-1].endswith("s  note 5")
    run.event("refused", reason="the guard is open")
    widget.refresh(run.model)
    assert widget.notes.text().splitlines()[0].endswith("the guard is open")
