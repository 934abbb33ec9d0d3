"""A stored session played again: at any moment it shows what the run showed then."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from drivers.clock import VirtualClock
from rig.command.sessions import run_session
from rig.desk.model.replay_model import ReplayModel
from rig.files import read_pair
from rig.session import open_session
from rig.shipped import find


@pytest.fixture(scope="module")
def path(tmp_path_factory: pytest.TempPathFactory) -> Path:
    rig, protocol = read_pair(find("boom"), find("quick"))
    out = tmp_path_factory.mktemp("session") / "quick.h5"
    run_session(rig, protocol, out, VirtualClock(), pace="fast")
    return out


@pytest.fixture
def player(path: Path) -> Iterator[ReplayModel]:
    with open_session(path) as session:
        yield ReplayModel(session)


def shown(player: ReplayModel) -> object:
    model = player.model
    rungs = [
        (rung.level, rung.regime, rung.state, rung.ended, [mark.outcome for mark in rung.taps])
        for rung in model.rungs
    ]
    return model.phase, rungs, model.body, model.last_tap, len(model.map["levels"]), model.exit_code


def test_the_end_is_what_the_run_came_to(player: ReplayModel) -> None:
    player.seek(player.duration_s)
    model = player.model
    final = player.session.results["final"]
    assert model.phase == "finished" and model.exit_code == 0
    assert [rung.drive_v for rung in model.rungs] == [8.0, 9.0, 10.0, 9.0, 8.0, 7.0]
    assert [rung.regime for rung in model.rungs] == [level["regime"] for level in final["levels"]]
    assert len(model.map["levels"]) == 6 and model.map["falling"]["kind"] == "divergence"
    assert sum(len(rung.taps) for rung in model.rungs) == len(player.taps()) == 10


def test_playing_and_jumping_show_the_same(player: ReplayModel) -> None:
    player.playing, player.speed = True, 5.0
    while player.position_s < 40.0:
        player.advance(0.033)
    played = shown(player)
    at_s = player.position_s
    player.seek(player.duration_s)
    player.seek(at_s)
    assert shown(player) == played
    player.seek(0.0)
    assert player.model.rungs == [] and player.model.map["levels"] == []


def test_it_stops_at_the_end(player: ReplayModel) -> None:
    player.playing, player.speed = True, 1000.0
    player.advance(1.0)
    assert player.position_s == player.duration_s and not player.playing
    assert player.advance(1.0) == set()


def test_steps_from_event_to_event_and_tap_to_tap(player: ReplayModel) -> None:
    times = [time_s for _, time_s in player.taps()]
    player.step(times, 1)
    assert player.position_s == pytest.approx(times[0]) and player.model.last_tap == 0
    player.step(times, 1)
    assert player.model.last_tap == 1
    player.step(times, -1)
    assert player.position_s == pytest.approx(times[0])
    assert player.step(times, -1) == set()
    words = [words for _, words in player.events()]
    assert "level 8.00 V rising" in words and "tap 0" in words and "halt: end of the protocol" in words


def test_a_tap_is_fitted_as_it_was_live(player: ReplayModel) -> None:
    picture = player.picture(0)
    assert picture is not None
    stored = player.session.results["final"]["taps"][0]
    for name in ("decay_per_s", "mode_hz"):
        assert picture["tap"][name]["value"] == pytest.approx(stored[name]["value"], rel=1e-6)
    assert len(picture["model_deg"]) == len(picture["model_time_s"]) > 100
    inside = [
        t for t in picture["model_time_s"] if not picture["from_s"] - 0.01 <= t <= picture["to_s"] + 0.01
    ]
    assert inside == []
    largest = max(abs(value) for value in picture["residual_deg"])
    assert 0.0 < largest < 0.5 * (max(picture["high_deg"]) - min(picture["low_deg"]))
    assert player.picture(999) is None
