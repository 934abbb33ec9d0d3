"""A replay in the window: the tap that is stayed with gets its picture, whatever was passed by on the way."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from pytestqt.qtbot import QtBot

from drivers.clock import VirtualClock
from rig.command.sessions import run_session
from rig.desk.replaying import Replaying
from rig.desk.theme import LIGHT
from rig.desk.widgets.replay_bar import ReplayBar
from rig.desk.widgets.run_page import RunPage
from rig.files import read_pair
from rig.shipped import find

LONG_MS = 60_000


@pytest.fixture(scope="module")
def path(tmp_path_factory: pytest.TempPathFactory) -> Path:
    rig, protocol = read_pair(find("boom"), find("quick"))
    out = tmp_path_factory.mktemp("session") / "quick.h5"
    run_session(rig, protocol, out, VirtualClock(), pace="fast")
    return out


@pytest.fixture
def replaying(path: Path, qtbot: QtBot) -> Iterator[Replaying]:
    page, bar = RunPage(LIGHT), ReplayBar(LIGHT)
    for part in (page, bar):
        qtbot.addWidget(part)
    made = Replaying(path, page, bar)
    made.begin()
    made.play(False)
    yield made
    page.end()
    made.close()


def test_the_tap_stayed_with_is_fitted_and_those_passed_by_are_not(
    replaying: Replaying, qtbot: QtBot
) -> None:
    for _ in range(4):
        replaying.step_tap(1)
    stayed = replaying.player.model.last_tap
    qtbot.waitUntil(lambda: stayed in replaying.player.model.pictures, timeout=LONG_MS)
    assert stayed == 3 and set(replaying.player.model.pictures) == {3}


def test_a_tap_chosen_while_another_is_fitted_gets_its_picture_too(
    replaying: Replaying, qtbot: QtBot
) -> None:
    player = replaying.player
    replaying.seek(player.duration_s)
    numbers = [number for number, _ in player.taps()]
    for number in numbers[:3]:
        qtbot.waitUntil(lambda: not replaying.fitter.busy, timeout=LONG_MS)
        replaying.show_tap(number)
        qtbot.waitUntil(lambda: replaying.fitter.busy, timeout=LONG_MS)
    replaying.show_tap(numbers[5])
    qtbot.waitUntil(lambda: numbers[5] in player.model.pictures, timeout=LONG_MS)
    assert set(numbers[:3]) <= set(player.model.pictures)


def test_a_tap_without_a_picture_is_not_tried_again_and_again(replaying: Replaying, qtbot: QtBot) -> None:
    made = []
    replaying.fitter.made.connect(lambda number, picture: made.append((number, picture is None)))
    for _ in range(3):
        for number in (999, 2):  # there is no tap 999
            replaying.show_tap(number)
            replaying._show(set())
            qtbot.waitUntil(lambda: not replaying._stay.isActive(), timeout=LONG_MS)
            qtbot.waitUntil(lambda: not replaying.fitter.busy, timeout=LONG_MS)
    assert made == [(999, True), (2, False)]


def test_fits_go_on_after_their_process_has_died(replaying: Replaying, qtbot: QtBot) -> None:
    replaying.show_tap(1)
    qtbot.waitUntil(lambda: replaying.fitter.busy, timeout=LONG_MS)
    process = replaying.fitter._process
    assert process is not None
    process.kill()
    qtbot.waitUntil(lambda: 1 in replaying._without, timeout=LONG_MS)
    replaying.show_tap(2)
    qtbot.waitUntil(lambda: 2 in replaying.player.model.pictures, timeout=LONG_MS)


def test_nothing_is_left_after_it_was_closed(replaying: Replaying, qtbot: QtBot, nothing_left: None) -> None:
    replaying.step_tap(1)
    qtbot.waitUntil(lambda: replaying.fitter.busy, timeout=LONG_MS)
    replaying.close()
    qtbot.wait(50)
    assert replaying.player.model.pictures == {}


def test_a_jump_back_keeps_the_pictures(replaying: Replaying, qtbot: QtBot) -> None:
    replaying.step_tap(1)
    qtbot.waitUntil(lambda: 0 in replaying.player.model.pictures, timeout=LONG_MS)
    replaying.seek(0.0)
    assert set(replaying.player.model.pictures) == {0}
