"""The whole window, without a screen: a protocol from arming to its session, a trip, keys that halt, replay."""

from __future__ import annotations

import os
import signal
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from PySide6.QtCore import Qt
from PySide6.QtWidgets import QApplication, QDialog
from pytestqt.qtbot import QtBot
from trials import PATIENT, SPIN, StandIn, job_for, patient_rig, stand_in, until

from rig.bench.job import Job
from rig.desk.entry import window as make_window
from rig.desk.theme import DARK
from rig.desk.window import Window
from rig.session import open_session

SWEEP = """haltere_protocol = 1
[protocol]
name = "short"
title = "Two levels with taps"

[[step]]
do = "staircase"
order = "rising"
levels = ["9 V", "10 V"]
taps = ["0.1 mN m s", "-0.1 mN m s"]
settle = "1 s"
settle_at_most = "2 s"
quiet = "0.5 s"
tap_observe = "2 s"
"""
LONG_MS = 90_000


@pytest.fixture
def window(qtbot: QtBot, tmp_path: Path, nothing_left: None) -> Iterator[Window]:
    made = make_window(tmp_path / "config", tmp_path / "state")
    made.memory.folder = str(tmp_path)
    made.sounds.on = False
    qtbot.addWidget(made)
    made.show()
    yield made
    if made.running:
        made.close()
    made.close()


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[StandIn]:
    with stand_in(tmp_path_factory.mktemp("stand-in"), *PATIENT) as one:
        yield one


def spinning(served: StandIn, out: Path, protocol: str = SPIN) -> Job:
    return job_for(served, out, protocol, rig=patient_rig(), pictures=True, may_go_on=True)


def start(window: Window, qtbot: QtBot, job: Job) -> None:
    window.start_run(job)
    qtbot.waitUntil(lambda: window.link.model.phase == "running", timeout=LONG_MS)


def told_of(window: Window) -> Callable[[], bool]:
    """Fails at once, with its reason, if the run has ended or waits where it should go on."""

    def told() -> bool:
        model = window.link.model  # type: ignore[union-attr]
        if model.phase in ("waiting", "finished", "failed"):
            raise AssertionError(f"{model.phase}: {model.reason} {[trip.sentence for trip in model.trips]}")
        return False

    return told


def phase(window: Window, qtbot: QtBot, name: str) -> None:
    qtbot.waitUntil(lambda: window.link is not None and window.link.model.phase == name, timeout=LONG_MS)


def test_a_whole_protocol_with_a_redone_tap_a_trip_and_going_on(
    window: Window, qtbot: QtBot, served: StandIn, tmp_path: Path
) -> None:
    start(window, qtbot, spinning(served, tmp_path / "run.h5", SWEEP))
    model = window.link.model  # type: ignore[union-attr]
    told = told_of(window)
    qtbot.waitUntil(
        lambda: (0 in model.pictures and model.tap(0).outcome != "observed") or told(), timeout=LONG_MS
    )
    assert window.run.tap.isVisible() and window.run.ladder.tap_box(0) is not None
    qtbot.keyClick(window, Qt.Key.Key_R)  # whichever tap was the last by then
    qtbot.waitUntil(lambda: model.unexplained is not None, timeout=LONG_MS)
    number = model.unexplained
    qtbot.keyClick(window, Qt.Key.Key_2)
    qtbot.waitUntil(lambda: model.tap(number).reason == "wrong way" or told(), timeout=LONG_MS)
    assert model.tap(number).outcome == "excluded" and model.unexplained is None
    served.fault("open_guard")
    phase(window, qtbot, "waiting")
    assert "guard" in model.trips[-1].sentence and window.run.prompt.isVisible()
    qtbot.keyClick(window, Qt.Key.Key_G)  # the guard is still open
    qtbot.waitUntil(lambda: any("guard is open" in words for _, words in model.notes), timeout=LONG_MS)
    served.fault("close_guard")
    qtbot.waitUntil(
        lambda: (qtbot.keyClick(window, Qt.Key.Key_G), model.phase == "running")[1], timeout=LONG_MS
    )
    qtbot.waitUntil(lambda: [rung.drive_v for rung in model.rungs][-1] == 10.0, timeout=LONG_MS)
    qtbot.keyClick(window, Qt.Key.Key_Escape)
    phase(window, qtbot, "waiting")
    qtbot.keyClick(window, Qt.Key.Key_E)
    qtbot.waitUntil(lambda: not window.running, timeout=LONG_MS)
    assert model.session and window.outcome.isVisible() and window.outcome.replay_button.isEnabled()
    with open_session(model.session) as session:
        kinds = [event.kind for event in session.events]
        assert session.losses == []
        left_out = {tap["tap"]: tap["reason"] for tap in session.results["final"]["excluded"]}
        assert left_out[number] == "excluded by the operator: wrong way"
    for kind in ("tap_excluded", "tap_reason", "trip", "waiting", "rearmed", "halt", "finished"):
        assert kind in kinds
    assert kinds.count("trip") == 1 and kinds[-1] == "finished"
    window.open_replay(model.session)
    assert window.replaying is not None


@pytest.mark.parametrize("key", [Qt.Key.Key_Escape, Qt.Key.Key_F12, Qt.Key.Key_Pause])
def test_the_halt_keys_work_whatever_has_the_focus(
    window: Window, qtbot: QtBot, served: StandIn, tmp_path: Path, key: Qt.Key
) -> None:
    start(window, qtbot, spinning(served, tmp_path / "run.h5"))
    dialog = QDialog(window)
    dialog.open()
    qtbot.keyClick(dialog, key)
    phase(window, qtbot, "waiting")
    dialog.close()
    window.ask("end")
    qtbot.waitUntil(lambda: not window.running, timeout=LONG_MS)
    with open_session(tmp_path / "run.h5") as session:
        assert [event.data["cause"] for event in session.events if event.kind == "halt"] == ["operator"]


def test_the_halt_keys_work_while_other_words_are_typed(
    window: Window, qtbot: QtBot, served: StandIn, tmp_path: Path
) -> None:
    start(window, qtbot, spinning(served, tmp_path / "run.h5"))
    model, tick = window.link.model, 0  # type: ignore[union-attr]
    for data in (
        {"kind": "level", "level": 0, "direction": "rising", "drive_v": 3.0},
        {"kind": "tap", "tap": 0, "level": 0, "by": "hand"},
        {"kind": "tap_excluded", "tap": 0, "reason": "rejected by the operator"},
    ):
        window._changed(model.take({"event": {"tick": tick, **data}}))
    qtbot.keyClick(window, Qt.Key.Key_6)
    line = window.run.prompt.why.line
    qtbot.keyClicks(line, "the rod 1")
    assert line.text() == "the rod 1" and model.phase == "running"
    qtbot.keyClick(line, Qt.Key.Key_Escape)
    phase(window, qtbot, "waiting")
    assert not line.isVisible()
    qtbot.keyClick(window, Qt.Key.Key_E)
    qtbot.waitUntil(lambda: not window.running, timeout=LONG_MS)
    with open_session(tmp_path / "run.h5") as session:
        assert [event.data["cause"] for event in session.events if event.kind == "halt"] == ["operator"]
        assert "tap_reason" not in [event.kind for event in session.events]


def test_the_halt_control_needs_one_press(
    window: Window, qtbot: QtBot, served: StandIn, tmp_path: Path
) -> None:
    start(window, qtbot, spinning(served, tmp_path / "run.h5"))
    qtbot.mousePress(window.run.halt, Qt.MouseButton.LeftButton)  # on press, not on release
    qtbot.waitUntil(lambda: not served.is_on, timeout=LONG_MS)
    phase(window, qtbot, "waiting")


def test_closing_the_window_halts_waits_and_seals(
    window: Window, qtbot: QtBot, served: StandIn, tmp_path: Path
) -> None:
    start(window, qtbot, spinning(served, tmp_path / "run.h5"))
    window.close()
    assert window.isVisible()  # until the session is sealed
    qtbot.waitUntil(lambda: not window.isVisible(), timeout=LONG_MS)
    with open_session(tmp_path / "run.h5") as session:
        assert session.events[-1].kind == "finished"


def test_closing_twice_leaves_the_run_to_its_own_process(
    window: Window, qtbot: QtBot, served: StandIn, tmp_path: Path
) -> None:
    start(window, qtbot, spinning(served, tmp_path / "run.h5"))
    window.close()
    window.close()
    assert not window.isVisible()
    until(lambda: (tmp_path / "run.h5").exists(), what="the session")


def test_a_bench_process_that_dies_is_told(
    window: Window, qtbot: QtBot, served: StandIn, tmp_path: Path
) -> None:
    start(window, qtbot, spinning(served, tmp_path / "run.h5"))
    os.kill(window.link.pid, signal.SIGKILL)  # type: ignore[union-attr]
    qtbot.waitUntil(lambda: not window.running, timeout=LONG_MS)
    assert "has died" in window.outcome.text.text() and "haltere recover" in window.outcome.text.text()
    until(lambda: not served.is_on, what="the watchdog")


def test_a_run_that_cannot_start_is_told_in_words(
    window: Window, qtbot: QtBot, served: StandIn, tmp_path: Path
) -> None:
    job = spinning(served, tmp_path / "run.h5")
    window.start_run(Job(**{**job.to_json(), "port": str(tmp_path / "absent")}))
    phase(window, qtbot, "failed")
    qtbot.waitUntil(lambda: not window.running, timeout=LONG_MS)
    assert "there is no such port" in window.outcome.text.text()
    qtbot.mouseClick(window.outcome.again_button, Qt.MouseButton.LeftButton)
    assert window.pages.currentWidget() is window.prepare


def test_files_that_are_no_sessions_are_refused_in_words(window: Window, tmp_path: Path) -> None:
    wrong = tmp_path / "wrong.h5"
    wrong.write_text("no session", encoding="utf-8")
    assert not window.open_replay(str(wrong))
    assert "not an HDF5 file" in window.statusBar().currentMessage()
    assert not window.open_replay(str(tmp_path / "absent.h5"))
    assert "there is no such session file" in window.statusBar().currentMessage()


def test_theme_and_geometry_are_remembered(qtbot: QtBot, tmp_path: Path) -> None:
    first = make_window(tmp_path / "config", tmp_path / "state")
    qtbot.addWidget(first)
    first.show()
    first.set_theme(DARK.name)
    first.close()
    second = make_window(tmp_path / "config", tmp_path / "state")
    qtbot.addWidget(second)
    assert second.theme is DARK
    assert first.memory.geometry and second.memory.geometry == first.memory.geometry
    second.close()
    assert QApplication.instance() is not None
