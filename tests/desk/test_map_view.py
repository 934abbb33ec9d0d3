"""The stability map: marks, bars, bands and curves stand where the analysis says, and a level can be chosen."""

from __future__ import annotations

import gc
import math
import sys
from itertools import pairwise

import numpy as np
import pytest
from invented_plots import NO_BOUNDARY, boundary, boxes, level, measured
from PySide6.QtCore import QPoint, Qt
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot
from told_runs import ToldRun, dressed, overlapping, settle

from rig.desk.model.map_model import hertz_marks, map_page, stiffness_seen
from rig.desk.model.ranges import WideningRange
from rig.desk.theme import DARK, LIGHT
from rig.desk.widgets.map_view import HINT, NOTHING, MapView, symbol

FIRM = "\N{NO-BREAK SPACE}"
FIT = [[25.9, 0.0, 24.0], [30.0, 80.0, 10.0], [36.0, 180.0, 6.0]]
THEORY = [[26.0, 0.0, 22.0], [30.0, 85.0, 9.0], [45.0, 360.0, 5.0]]
LEVELS = (
    ("rising", 8.0, 28.7, 62.0, {}),
    ("rising", 9.0, 32.3, 119.0, {}),
    ("falling", 9.0, 32.4, 118.0, {"regime": "undetermined"}),
    ("falling", 8.0, 28.6, 60.0, {"regime": "unstable"}),
    ("falling", 7.0, 25.0, None, {}),
)


def run(levels: int = len(LEVELS)) -> ToldRun:
    """A run that has been through some levels, and its map."""
    made = ToldRun()
    made.model.take({"picture": {"theory": {"averaged_fold_hz": 26.0, "curve": THEORY}}})
    for direction, drive_v, flap_hz, _, _ in LEVELS[:levels]:
        made.level(direction, drive_v)
        made.flap(flap_hz)
        made.tap("accepted")
        made.tap("double")
        made.level_end()
    told = [
        level(direction, volts, flap_hz, stiffness, **more)
        for direction, volts, flap_hz, stiffness, more in LEVELS[:levels]
    ]
    whole = levels == len(LEVELS)
    made.model.take(
        {
            "picture": {
                "map": {
                    "levels": told,
                    "falling": boundary(25.9, 0.2) if whole else NO_BOUNDARY,
                    "rising": NO_BOUNDARY,
                    "fit_curve": FIT if whole else [],
                }
            }
        }
    )
    return made


@pytest.fixture
def view(qapp: QApplication, qtbot: QtBot) -> MapView:
    made = MapView(dressed(qapp))
    qtbot.addWidget(made)
    settle(qapp, made, 340, 260)
    return made


# -- the model -----------------------------------------------------------------------------------------


def test_levels_in_order_of_flap_rate_with_their_shapes() -> None:
    points = map_page(run().model).points
    told = [(point.direction, point.drive_v, point.shape, point.on_strip) for point in points]
    assert told == [
        ("falling", 7.0, "crossed", True),
        ("falling", 8.0, "crossed", False),
        ("rising", 8.0, "filled", False),
        ("rising", 9.0, "filled", False),
        ("falling", 9.0, "hollow", False),
    ]
    words = points[2].words.replace(FIRM, " ")
    assert words == (
        "▲ rising 8 V: 28.70 Hz, stiffness 62.0 ±4.0 1/s², decay 0.800 ±0.020 1/s, 2 of 2 returned, stable"
    )
    assert points[0].words.endswith("unstable, bouncing")
    assert points[2].left_out == "Tap 1 double hit: struck 2 times"


def test_a_level_under_way_is_not_taken_for_lost() -> None:
    """Its results so far call it lost, as nothing has ended it yet; the run's verdicts say how it stands."""
    made = run(1)
    made.level("rising", 9.0)
    made.flap(32.3)
    told = made.model.map
    told["levels"].append(level("rising", 9.0, 32.3, None, state="lost"))
    point = map_page(made.model).points[-1]
    assert (point.drive_v, point.shape, point.regime) == (9.0, "hollow", "undetermined")
    assert point.words.endswith("undetermined, under way") or point.words.endswith("held, under way")
    made.level_end("unstable", "lost")
    assert map_page(made.model).points[-1].shape == "crossed"


def test_nothing_is_made_up_before_there_is_a_map() -> None:
    page = map_page(ToldRun().model)
    assert page.points == page.bands == () and not len(page.fit[0]) and not len(page.theory[0])


def test_a_very_wide_interval_does_not_set_the_range() -> None:
    made = run()
    made.model.map["levels"][0]["stiffness_per_s2"] = measured(62.0, 5000.0)
    seen = stiffness_seen(map_page(made.model))
    assert max(seen) < 150.0 and min(seen) >= 0.0


def test_flap_rates_stand_at_their_squares_without_crowding() -> None:
    marks = hertz_marks(600.0, 1400.0, 8)
    assert all(value == float(text) ** 2 for value, text in marks)
    assert [text for _, text in marks] == ["26", "28", "30", "32", "34", "36"]
    low = hertz_marks(0.0, 1600.0, 8)
    assert all(after[0] - before[0] >= 200.0 for before, after in pairwise(low))


def test_a_range_only_widens_until_it_is_told_to_forget() -> None:
    kept = WideningRange(0.0)
    assert kept.take([], (0.0, 10.0)) == (0.0, 10.0)
    assert kept.take([5.0], (0.0, 10.0)) == (0.0, 10.0)  # one value: around it, as wide as before
    assert kept.take([20.0, 30.0], (0.0, 10.0)) == (5.0, 30.0)
    assert kept.take([25.0, math.nan], (0.0, 10.0)) == (5.0, 30.0)
    kept.forget()
    assert kept.take([1.0, 2.0], (0.0, 10.0)) == (1.0, 2.0)


# -- the picture ---------------------------------------------------------------------------------------


def test_marks_and_bars_stand_where_the_levels_are(view: MapView) -> None:
    view.refresh(run().model)
    rising = view.marks["rising"].points()
    assert np.allclose([tuple(point.pos()) for point in rising], [(28.7**2, 62.0), (32.3**2, 119.0)])
    bars = np.column_stack((view.bars["rising"].xs, view.bars["rising"].ys))
    wanted = [(28.7**2, 58.0), (28.7**2, 66.0), (28.6**2, 62.0), (28.8**2, 62.0)]
    assert np.allclose(bars[:4], wanted) and len(bars) == 8
    assert view.bars["rising"].connect == "pairs"
    assert np.allclose(view.fit.xs, [point[0] ** 2 for point in FIT])
    assert np.allclose(view.theory.ys, [point[1] for point in THEORY])


def test_what_has_no_stiffness_stands_on_the_strip_below_all_numbers(view: MapView) -> None:
    view.refresh(run().model)
    (point,) = [one for one in view.page.points if one.on_strip]
    at = view.place_of(point)
    others = [view.place_of(one).y() for one in view.page.points if not one.on_strip]
    zero = view.canvas.mapFromScene(view.chart.view.mapViewToScene(view.chart.view.viewRect().center()))
    assert at.y() > max(others) and at.y() > zero.y()
    assert view.chart.left.ticks[0][1] == "none"
    assert view.chart.left.ticks[1][0] >= view.chart.numbers_from > view.chart.left.ticks[0][0]


def test_regime_and_direction_are_told_by_form(view: MapView) -> None:
    view.refresh(run().model)
    spots = {tuple(point.pos()): point for point in view.marks["falling"].points()}
    hollow, crossed = spots[(32.4**2, 118.0)], spots[(28.6**2, 60.0)]
    filled = view.marks["rising"].points()[0]
    assert hollow.brush().color().name().upper() == LIGHT.panel
    assert filled.brush().color().name().upper() == LIGHT.rising
    assert crossed.symbol().elementCount() == hollow.symbol().elementCount() + 4
    tip = {way: symbol(way, "filled").pointAtPercent(0.0).y() for way in ("rising", "falling")}
    assert tip["rising"] > 0.0 > tip["falling"], "y runs downwards: the base of a rising mark lies below"
    words = [entry.words for entry in view.key.entries]
    assert words[:4] == ["falling", "rising", "undetermined", "unstable or not held"]


def test_a_boundary_is_a_band_as_wide_as_its_interval(view: MapView) -> None:
    view.refresh(run().model)
    band = view.bands["falling"]
    assert band.isVisible() and not view.bands["rising"].isVisible() and not view.edges["rising"].isVisible()
    assert (band.rect().left(), band.rect().right()) == pytest.approx((25.7**2, 26.1**2))
    assert view.edges["falling"].value() == pytest.approx(25.9**2)
    (words,) = [entry.words for entry in view.key.entries if "boundary" in entry.words]
    assert words.replace(FIRM, " ") == "falling boundary 25.90 ±0.20 Hz"


def test_scales_name_quantity_and_unit(view: MapView) -> None:
    view.refresh(run().model)
    chart = view.chart
    assert chart.bottom is not None and chart.top is not None
    assert chart.bottom.name == "flap rate squared (Hz²)"
    assert (view.caption.text, view.caption.right) == ("slow stiffness (1/s²)", "flap rate (Hz)")
    assert chart.top.ticks and all(value == float(text) ** 2 for value, text in chart.top.ticks)


def test_it_grows_without_leaving_what_was_seen(view: MapView) -> None:
    seen: list[tuple[list[float], list[float]]] = []
    made = run(1)
    view.refresh(made.model)
    for levels in range(1, len(LEVELS) + 1):
        made.model.map = run(levels).model.map
        view.refresh(made.model)
        x, y = view.chart.view.viewRange()
        for before_x, before_y in seen:
            assert x[0] <= before_x[0] + 1e-9 and x[1] >= before_x[1] - 1e-9
            assert y[1] >= before_y[1] - 1e-9
        for point in view.page.points:
            assert x[0] < point.square < x[1]
        # A single level says nothing of how wide the map will be.
        if levels > 1:
            seen.append((x, y))
    view.refresh(run(2).model)
    assert view.chart.view.viewRange()[0][1] < 1.1 * 32.3**2, "another run begins anew"


def test_before_the_first_level_a_word_says_so(view: MapView) -> None:
    view.refresh(ToldRun().model)
    assert view.chart.words.text == NOTHING and not view.chart.left.ticks
    view.refresh(run(0).model)
    x, _ = view.chart.view.viewRange()
    assert x[0] < 26.0**2 < x[1] and view.chart.words.text == NOTHING


# -- choosing ------------------------------------------------------------------------------------------


def test_a_click_chooses_the_level_under_it(view: MapView, qtbot: QtBot) -> None:
    view.refresh(run().model)
    assert view.told.text() == HINT
    for point in view.page.points[:3]:
        at = view.place_of(point).toPoint()
        with qtbot.waitSignal(view.level_chosen) as told:
            qtbot.mouseClick(view.canvas.viewport(), Qt.MouseButton.LeftButton, pos=at + QPoint(2, 2))
        assert told.args[1] == pytest.approx(point.drive_v)
        assert view.told.text() == view.point.words  # type: ignore[union-attr]
    with qtbot.assertNotEmitted(view.level_chosen):
        qtbot.mouseClick(view.canvas.viewport(), Qt.MouseButton.LeftButton, pos=QPoint(60, 40))


def test_keys_go_through_the_levels_and_return_chooses(view: MapView, qtbot: QtBot) -> None:
    told: list[tuple[str, float]] = []
    view.level_chosen.connect(lambda direction, volts: told.append((direction, volts)))
    view.refresh(run().model)
    qtbot.keyClick(view, Qt.Key.Key_Return)
    assert told == [], "nothing is chosen yet"
    for _ in range(3):
        qtbot.keyClick(view, Qt.Key.Key_Right)
    assert told == [] and "rising 8" in view.told.text()
    qtbot.keyClick(view, Qt.Key.Key_Return)
    qtbot.keyClick(view, Qt.Key.Key_Left)
    qtbot.keyClick(view, Qt.Key.Key_Enter)
    assert told == [("rising", 8.0), ("falling", 8.0)]
    ring = view.ring.getData()
    assert (ring[0][0], ring[1][0]) == pytest.approx((28.6**2, 60.0))
    for _ in range(9):
        qtbot.keyClick(view, Qt.Key.Key_Right)
    assert view.point is view.page.points[-1]
    assert view.accessibleDescription().startswith("5 levels. ▼")


def test_what_was_chosen_stays_chosen_as_the_map_grows(view: MapView) -> None:
    made = run()
    view.refresh(made.model)
    view.choose(view.page.points[2], tell=False)
    made.model.map = run().model.map
    view.refresh(made.model)
    assert view.chosen == ("rising", 8.0) and "rising 8" in view.told.text()


def test_a_tip_says_why_taps_were_left_out(view: MapView) -> None:
    made = run()
    made.event("tap_excluded", tap=0, reason="the cable was touched")
    view.refresh(made.model)
    tip = view.tip(view.page.points[2])
    assert "Tap 0 excluded: the cable was touched" in tip and "Tap 1 double hit: struck 2 times" in tip


# -- look ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("size", [(340, 260), (680, 420), (1020, 780)])
def test_nothing_is_cut_or_overlaps(size: tuple[int, int], view: MapView, qapp: QApplication) -> None:
    view.refresh(run().model)
    view.choose(view.page.points[2], tell=False)
    settle(qapp, view, *size)
    view.refresh(run().model)
    view.choose(view.page.points[2], tell=False)
    qapp.processEvents()
    placed = boxes(view, [view.canvas, view.key, view.told])
    assert not overlapping(placed)
    assert all(top + tall <= size[1] for _, top, _, tall in placed)
    assert view.key.height() >= view.key.heightForWidth(view.key.width())
    assert view.told.height() >= view.told.heightForWidth(view.told.width())
    assert view.chart.view.height() >= 4.0 * view.fontMetrics().height()
    x, _ = view.chart.view.viewRange()
    assert all(x[0] <= tick[0] <= x[1] for tick in view.chart.bottom.ticks)  # type: ignore[union-attr]


def test_themes_change_every_colour(view: MapView) -> None:
    view.refresh(run().model)
    view.set_theme(DARK)
    assert view.fit.pen().color().name().upper() == DARK.fit
    assert view.bars["rising"].pen().color().name().upper() == DARK.rising
    assert view.marks["falling"].points()[0].pen().color().name().upper() == DARK.falling
    assert view.bands["falling"].brush().color().name().upper() == DARK.falling


def test_a_thousand_refreshes_leave_nothing_behind(view: MapView, qapp: QApplication) -> None:
    models = [run(3).model, run().model]

    def refresh(times: int) -> None:
        for at in range(times):
            view.refresh(models[at % 2])
        qapp.processEvents()
        gc.collect()

    refresh(100)
    items, blocks = len(view.canvas.scene().items()), sys.getallocatedblocks()
    refresh(1000)
    assert len(view.canvas.scene().items()) == items
    assert sys.getallocatedblocks() - blocks < 2000


def test_values_have_units_and_intervals(view: MapView) -> None:
    view.refresh(run().model)
    columns = {column.header: list(column.values) for column in view.values()}
    assert columns["drive (V)"] == [7.0, 8.0, 8.0, 9.0, 9.0]
    assert columns["slow stiffness (1/s²)"] == [None, 60.0, 62.0, 119.0, 118.0]
    assert columns["slow stiffness, 95 % from (1/s²)"][2] == 58.0
    assert columns["direction"][0] == "falling" and columns["state"][0] == "bouncing"
