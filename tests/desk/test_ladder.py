"""The course as a ladder: what stands where, that labels never overlap, and how taps are chosen."""

from __future__ import annotations

from itertools import pairwise

import pytest
from PySide6.QtCore import QPoint, Qt
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot
from told_runs import Planned, ToldRun, dressed, overlapping, settle, staircase, walked

from rig.desk.model.ladder_model import Ladder, ladder, spread, taps_in_order, ticks
from rig.desk.model.run_model import RunModel
from rig.desk.model.wording import OUTCOME_SHAPES, OUTCOME_WORDS
from rig.desk.widgets.ladder import LadderView
from rig.desk.widgets.shapes import SHAPES

PLAN = staircase((7.0, 8.0, 9.0))


def place(view: Ladder, direction: str, drive_v: float) -> object:
    (found,) = (one for one in view.places if (one.direction, one.drive_v) == (direction, drive_v))
    return found


# -- the model -----------------------------------------------------------------------------------------


def test_before_a_run_the_plan_stands_there_with_its_first_level_next() -> None:
    view = ladder(RunModel(), PLAN)
    assert [(one.direction, one.drive_v) for one in view.places] == [(p.direction, p.drive_v) for p in PLAN]
    assert {one.filling for one in view.places} == {"planned"}
    assert [one.next for one in view.places] == [True, False, False, False, False]
    assert view.next_words == "next: 7.00 V rising, 25.2 Hz"
    assert view.unit == "Hz"
    assert view.low < 25.2 and view.high > 32.4


def test_rungs_stand_at_their_measured_flap_rate_and_tell_their_regime() -> None:
    run = ToldRun()
    for volts, flap, regime, state in (
        (7.0, 25.1, "unstable", "bouncing"),
        (8.0, 28.7, "stable", "held"),
        (9.0, 32.3, "undetermined", "held"),
        (10.0, 36.0, "undetermined", "friction_held"),
    ):
        run.level("rising", volts)
        run.flap(flap)
        run.level_end(regime, state)
    view = ladder(run.model)
    assert [one.height for one in view.places] == [25.1, 28.7, 32.3, 36.0]
    assert [one.flap for one in view.places] == ["25.1 Hz", "28.7 Hz", "32.3 Hz", "36.0 Hz"]
    assert [one.word for one in view.places] == ["unstable", "stable", "undetermined", "friction holds"]
    assert [one.filling for one in view.places] == ["crossed", "filled", "hollow", "hollow"]


def test_a_body_that_bounces_is_crossed_and_said_so() -> None:
    run = ToldRun()
    run.level("falling", 7.0)
    run.flap(25.0, "bouncing")
    run.level_end("undetermined", "bouncing")
    (one,) = ladder(run.model).places
    assert (one.direction, one.word, one.filling) == ("falling", "bouncing", "crossed")


def test_a_level_under_way_is_not_called_undetermined() -> None:
    run = walked(PLAN, 2)
    run.verdict("level", level=1, state="held", regime="undetermined", decay_half_width_per_s=None)
    here = place(ladder(run.model, PLAN), "rising", 8.0)
    assert (here.here, here.word, here.filling) == (True, "measuring", "open")


def test_what_is_next_follows_the_plan_and_ends_with_it() -> None:
    view = ladder(walked(PLAN, 3).model, PLAN)
    assert view.next_words == "next: 8.00 V falling, 28.8 Hz"
    assert place(view, "falling", 8.0).next
    assert ladder(walked(PLAN, 5).model, PLAN).next_words == "next: the drive ramps down"


def test_taps_have_a_shape_for_each_outcome() -> None:
    run = ToldRun()
    run.level("rising", 8.0)
    run.flap(28.8)
    for outcome in ("accepted", "lost", "double", "left_out", "excluded", "observed"):
        run.tap(outcome)
    (one,) = ladder(run.model).places
    assert [tap.outcome for tap in one.taps] == [
        "accepted",
        "lost",
        "double",
        "left_out",
        "excluded",
        "observed",
    ]
    shapes = [tap.shape for tap in one.taps]
    assert len(set(shapes)) == 6 and set(shapes) <= set(SHAPES)
    assert set(OUTCOME_SHAPES) == set(OUTCOME_WORDS)
    assert one.taps[2].sentence == "Tap 2 double hit: struck 2 times"
    # 1.96 standard deviations of 0.01 1/s on either side (normal distribution).
    assert "decay rate 0.800 ± 0.020 1/s (95 %)" in one.taps[0].details


def test_visits_to_one_drive_share_a_rung_and_disagreement_is_told() -> None:
    run = ToldRun()
    for regime in ("stable", "unstable"):
        run.level("rising", 8.0)
        run.flap(28.8)
        run.tap()
        run.level_end(regime)
    (one,) = ladder(run.model).places
    assert (one.visits, one.word, one.filling) == (2, "stable and not", "hollow")
    assert [tap.tap for tap in one.taps] == [0, 1]
    assert "2 visits" in one.details


def test_after_a_trip_the_same_level_is_next_and_the_plan_goes_on_from_there() -> None:
    run = walked(PLAN, 2)
    run.trip()
    run.event("turning", flap_hz=20.0)
    run.event("waiting")
    assert ladder(run.model, PLAN).next_words == "on going on: 8.00 V again"
    run.event("rearmed", by="somebody")
    run.level("rising", 8.0, number=5)  # beyond the plan, as a level that is begun again is
    view = ladder(run.model, PLAN)
    assert view.next_words == "next: 9.00 V rising, 32.4 Hz"
    assert place(view, "rising", 8.0).visits == 2
    assert place(view, "rising", 8.0).here


def test_a_rung_that_will_be_visited_again_is_marked_as_next() -> None:
    plan = (*PLAN[:2], PLAN[0])  # 7 V, 8 V, 7 V again, all rising
    view = ladder(walked(plan, 2).model, plan)
    assert len(view.places) == 2
    assert [one.next for one in view.places] == [True, False]
    assert view.next_words == "next: 7.00 V rising, 25.2 Hz"


def test_while_no_flap_rate_is_known_the_height_is_the_drive() -> None:
    run = ToldRun()
    run.level("rising", 7.0)
    view = ladder(run.model, [Planned("rising", volts, None) for volts in (7.0, 8.0)])
    assert view.unit == "V"
    assert [one.height for one in view.places] == [7.0, 8.0]
    assert [one.flap for one in view.places] == ["", ""]
    assert (view.pointer, view.pointer_words) == (7.0, "7.00")


def test_a_rate_not_yet_measured_is_put_between_its_neighbours_but_not_told() -> None:
    run = ToldRun()
    for volts, flap in ((7.0, 25.0), (9.0, 33.0)):
        run.level("rising", volts)
        run.flap(flap)
        run.level_end()
    run.level("falling", 8.0)
    between = place(ladder(run.model), "falling", 8.0)
    assert between.height == pytest.approx(29.0)
    assert between.flap == ""


def test_the_pointer_follows_the_crank() -> None:
    run = walked(PLAN, 2)
    run.standing(flap_hz=27.123)
    view = ladder(run.model, PLAN)
    assert (view.pointer, view.pointer_direction, view.pointer_words) == (27.12, "rising", "27.1")
    run.event("halt", how="ramp", cause="end of the protocol")
    run.event("turning", flap_hz=1.0)
    run.event("finished", exit_code=0, reason="done")
    assert ladder(run.model, PLAN).pointer is None


@pytest.mark.parametrize("many", [1, 3, 10])
def test_spread_blocks_keep_their_order_and_stay_inside(many: int) -> None:
    wanted = [50.0 + 0.1 * at for at in range(many)]
    made = spread(wanted, [9.0] * many, 0.0, 100.0)
    assert made is not None
    assert all(second - first >= 9.0 - 1e-9 for first, second in pairwise(made))
    assert min(made) >= 4.5 and max(made) <= 95.5
    assert sum(made) / many == pytest.approx(sum(wanted) / many)  # least squares: moved both ways alike


def test_spread_says_when_there_is_no_room() -> None:
    assert spread([1.0, 2.0], [60.0, 60.0], 0.0, 100.0) is None
    assert spread([10.0, 90.0], [5.0, 5.0], 0.0, 100.0) == [10.0, 90.0]


def test_ticks_are_round() -> None:
    assert ticks(22.3, 38.1, 4) == [25.0, 30.0, 35.0]
    assert ticks(6.9, 8.1, 6) == [7.0, 7.2, 7.4, 7.6, 7.8, 8.0]
    assert ticks(3.0, 3.0, 4) == []


# -- the widget ----------------------------------------------------------------------------------------


def shown(
    qtbot: QtBot, qapp: QApplication, run: ToldRun, planned: tuple[Planned, ...], width: int
) -> LadderView:
    widget = LadderView(dressed(qapp))
    qtbot.addWidget(widget)
    widget.set_planned(planned)
    widget.refresh(run.model)
    settle(qapp, widget, width, 600)
    return widget


@pytest.mark.parametrize("width", [240, 260, 280])
@pytest.mark.parametrize("levels", [3, 9, 14, 30])
def test_nothing_overlaps_or_leaves_the_widget(
    qtbot: QtBot, qapp: QApplication, levels: int, width: int
) -> None:
    planned = staircase([6.0 + 6.0 * at / levels for at in range(levels)])
    run = walked(planned, levels + levels // 2, ("accepted", "lost", "double", "excluded"))
    widget = shown(qtbot, qapp, run, planned, width)
    blocks = widget.blocks()
    labels = [(text, box) for block in blocks for text, box in block.labels]
    assert len(blocks) == len(planned)
    assert not overlapping([box for _, box in labels])
    texts = [box for _, box in labels]
    taps = [drawn.box for block in blocks for drawn in block.taps]
    assert not [
        (one, other)
        for one, other in overlapping([*texts, *taps])
        if (one < len(texts)) != (other < len(texts))
    ]
    legend = [box for _, _, box in widget.legend()]
    assert not overlapping([*texts, *legend, widget.next_box()])
    advance = widget._sizes().width_of
    for text, (left, top, _, height) in labels:
        assert left >= 0.0 and left + advance(text) <= width, text
        assert top >= 0.0 and top + height <= 600.0, text


def test_with_room_every_rung_tells_drive_flap_rate_and_word(qtbot: QtBot, qapp: QApplication) -> None:
    planned = staircase((7.0, 7.5, 8.0, 8.5))
    widget = shown(qtbot, qapp, walked(planned, 5), planned, 260)
    told = {(b.place.direction, b.place.drive_v): [text for text, _ in b.labels] for b in widget.blocks()}
    assert told["rising", 7.5] == ["7.50 V", "27.0 Hz", "undetermined"]
    assert told["falling", 8.0] == ["8.00 V", "28.8 Hz", "measuring"]
    assert told["falling", 7.0] == ["7.00 V", "25.2 Hz"]


def test_the_level_at_hand_keeps_its_label_when_rungs_are_many(qtbot: QtBot, qapp: QApplication) -> None:
    planned = staircase([5.0 + 0.1 * at for at in range(36)])
    widget = shown(qtbot, qapp, walked(planned, 30), planned, 260)
    (here,) = (block for block in widget.blocks() if block.place.here)
    bare = [block for block in widget.blocks() if block.place.visits and not block.labels]
    assert bare and here.labels
    assert widget.hint_at(QPoint(round(bare[0].rail_x), round(bare[0].rail_y)).toPointF()) != ""


def test_a_click_on_a_tap_chooses_it(qtbot: QtBot, qapp: QApplication) -> None:
    widget = shown(qtbot, qapp, walked(PLAN, 3), PLAN, 260)
    box = widget.tap_box(3)
    assert box is not None
    with qtbot.waitSignal(widget.tap_chosen) as chosen:
        qtbot.mouseClick(widget, Qt.MouseButton.LeftButton, pos=box.center().toPoint())
    assert chosen.args == [3]
    with qtbot.assertNotEmitted(widget.tap_chosen):
        qtbot.mouseClick(widget, Qt.MouseButton.LeftButton, pos=QPoint(130, 5))


def test_arrow_keys_walk_through_the_taps(qtbot: QtBot, qapp: QApplication) -> None:
    run = walked(PLAN, 3)
    widget = shown(qtbot, qapp, run, PLAN, 260)
    assert taps_in_order(widget.view) == [0, 1, 2, 3, 4, 5]
    seen = []
    widget.tap_chosen.connect(seen.append)
    key = Qt.Key
    for pressed, expected in (
        (key.Key_End, 5),
        (key.Key_Left, 4),
        (key.Key_Left, 3),
        (key.Key_Down, 0),  # 8 V to 7 V
        (key.Key_Left, 0),
        (key.Key_Up, 2),
        (key.Key_Up, 4),
        (key.Key_Up, 4),
        (key.Key_Home, 0),
        (key.Key_Right, 1),
    ):
        qtbot.keyClick(widget, pressed)
        assert widget.focus_tap == expected
    for chooses in (key.Key_Return, key.Key_Enter, key.Key_Space):
        qtbot.keyClick(widget, chooses)
    assert seen == [1, 1, 1]
    assert "Tap 1 accepted" in widget.accessibleDescription()


def test_hints_tell_of_taps_and_rungs(qtbot: QtBot, qapp: QApplication) -> None:
    widget = shown(qtbot, qapp, walked(PLAN, 3), PLAN, 260)
    box = widget.tap_box(0)
    assert box is not None
    told = widget.hint_at(box.center())
    assert "Tap 0 accepted" in told and "impulse +0.100 mN m s" in told and "7.00 V rising, stable" in told
    (rung,) = (block for block in widget.blocks() if block.place.drive_v == 8.0 and block.place.taps)
    left, top, _, _ = rung.box
    told = widget.hint_at(QPoint(round(left + 2), round(top + 2)).toPointF())
    assert "flap rate 28.80 Hz" in told and "undetermined" in told
    assert widget.hint_at(QPoint(130, 5).toPointF()) == ""


def test_a_long_row_of_taps_shows_the_latest_and_the_one_in_focus(qtbot: QtBot, qapp: QApplication) -> None:
    run = ToldRun()
    run.level("rising", 8.0)
    run.flap(28.8)
    for _ in range(40):
        run.tap()
    widget = shown(qtbot, qapp, run, (), 260)
    (block,) = widget.blocks()
    assert block.taps[-1].tap.tap == 39
    assert block.left_out == 40 - len(block.taps) > 0
    assert widget.tap_box(0) is None
    qtbot.keyClick(widget, Qt.Key.Key_Home)
    assert widget.tap_box(0) is not None


def test_a_new_run_forgets_the_taps_of_the_old(qtbot: QtBot, qapp: QApplication) -> None:
    widget = shown(qtbot, qapp, walked(PLAN, 3), PLAN, 260)
    qtbot.keyClick(widget, Qt.Key.Key_End)
    widget.refresh(RunModel())
    assert widget.focus_tap is None
    assert not any(block.taps for block in widget.blocks())
    qtbot.keyClick(widget, Qt.Key.Key_Left)
    assert widget.focus_tap is None


def test_the_pointer_moves_on_the_screen(qtbot: QtBot, qapp: QApplication) -> None:
    run = walked(PLAN, 2)
    widget = shown(qtbot, qapp, run, PLAN, 260)
    before = widget.grab().toImage()
    widget.refresh(run.model)
    assert widget.grab().toImage() == before
    run.standing(flap_hz=26.0)
    widget.refresh(run.model)
    assert widget.grab().toImage() != before


def test_a_theme_changes_every_part(qtbot: QtBot, qapp: QApplication) -> None:
    widget = shown(qtbot, qapp, walked(PLAN, 2), PLAN, 260)
    light = widget.grab().toImage()
    widget.set_theme(dressed(qapp, "dark"))
    dark = widget.grab().toImage()
    changed = sum(
        light.pixelColor(x, y) != dark.pixelColor(x, y) for x in range(0, 260, 3) for y in range(0, 600, 3)
    )
    assert changed > 500
