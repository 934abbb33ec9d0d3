"""Why a tap was left out, told after it was: one reason, whether the run, a replay or the analysis is asked."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

import pytest
from short_sessions import make

from rig.command.sessions import analyse_session, session_rig
from rig.desk.model.replay_model import ReplayModel
from rig.evaluation.replay import Replay
from rig.evaluation.stream import RowStore
from rig.evaluation.tap import analyse_tap
from rig.evaluation.timeline import TapVisit
from rig.events import Event
from rig.report.tables import excluded_lines
from rig.session import Session, open_session

REASONS = {0: "too hard", 1: "the cable was touched"}


@pytest.fixture(scope="module")
def session(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Session]:
    with open_session(make("halted", tmp_path_factory.mktemp("reasons") / "a.h5")) as opened:
        yield opened


def results(session: Session, events: Sequence[Event]) -> dict[str, Any]:
    """What the analysis makes of the session's rows and of events."""
    again = Replay(session_rig(session), session.streams["board"], events)
    list(again.steps(5000))
    return again.finish().to_json()


def why(told: dict[str, Any]) -> dict[int, str]:
    return {tap["tap"]: tap["reason"].removeprefix("excluded by the operator: ") for tap in told["excluded"]}


def test_it_is_told_by_run_analysis_and_report(session: Session) -> None:
    assert [event.data for event in session.events if event.kind == "tap_reason"] == [
        {"tap": 0, "reason": "struck twice"},
        {"tap": 1, "reason": "the cable was touched"},
        {"tap": 0, "reason": "too hard"},  # the later word holds
    ]
    analysed = analyse_session(session, session_rig(session))
    assert why(session.results["final"]) == why(analysed.to_json()) == REASONS
    lines = excluded_lines(analysed)
    assert lines[:2] == [
        "Tap 0: Excluded by the operator: too hard.",
        "Tap 1: Excluded by the operator: the cable was touched.",
    ]
    told = {one["tap"]: one["reason"] for one in session.results["live"] if one["kind"] == "tap"}
    assert told[1] == "excluded by the operator: the cable was touched"  # known when it was judged


def test_told_later_it_comes_to_the_same_as_told_at_once(session: Session) -> None:
    """But for the words nothing changes: the taps left out are no better known for their reasons."""
    at_once = [
        Event(event.tick, event.kind, {"tap": event.data["tap"], "reason": REASONS[event.data["tap"]]})
        if event.kind == "tap_excluded"
        else event
        for event in session.events
        if event.kind != "tap_reason"
    ]
    assert results(session, at_once) == results(session, session.events)


def test_events_cut_anywhere_tell_what_had_been_said(session: Session) -> None:
    said: dict[int, str] = {}
    seen = set()
    for count, event in enumerate(session.events, 1):
        if event.kind in ("tap_excluded", "tap_reason"):
            said[event.data["tap"]] = event.data["reason"]
            told = why(results(session, session.events[:count]))
            judged = {tap: reason for tap, reason in said.items() if tap in told}
            assert told == judged
            seen.add(tuple(told.values()))
    assert ("the operator asked for it again",) in seen and tuple(REASONS.values()) in seen


def test_a_reason_alone_leaves_nothing_out(session: Session) -> None:
    """Of a tap that was never left out, of one that never was, and before there is a level."""
    first, *rest = session.events
    strange = [
        Event(first.tick, "tap_reason", {"tap": 2, "reason": "before anything"}),
        *rest,
        *(Event(rest[-1].tick, "tap_reason", {"tap": tap, "reason": "for nothing"}) for tap in (2, 99, -1)),
    ]
    assert results(session, [first, *strange]) == results(session, session.events)


def test_the_operators_word_comes_first_whatever_the_record_shows(session: Session) -> None:
    """Given again a moment after it was given, or given to a body on its end stop: nothing could be fitted."""
    board = session.streams["board"]
    (tick, *_) = (event.tick for event in session.events if event.kind == "tap")
    store = RowStore(board.channels, board.tick_hz)
    store.append(board.part(board.first_tick, tick + board.tick_hz))

    def reason(at: int, seconds: float, excluded: str) -> str:
        end = at + int(seconds * board.tick_hz)
        visit = TapVisit(0, 0, at, 1e-4, "tapper", end_tick=end, excluded=excluded)
        return analyse_tap(store, visit, session.rig).result.reason

    at_stop = board.first_tick + 2 * board.tick_hz
    for where, seconds, shown in ((tick, 0.05, "the record around the tap is too short"), (at_stop, 2.0, "")):
        plain = reason(where, seconds, "")
        assert shown in plain and "operator" not in plain
        assert reason(where, seconds, "too hard").startswith("excluded by the operator: too hard")
    assert plain.endswith("captured by the tap")
    assert reason(at_stop, 2.0, "too hard") == f"excluded by the operator: too hard; {plain}"


def test_the_windows_replay_tells_it_when_it_was_said(session: Session) -> None:
    player = ReplayModel(session)

    def at(tick: int) -> tuple[str, str]:
        player.seek(player.seconds(tick) + 1e-3)
        mark = player.model.tap(0)
        assert mark is not None
        return mark.outcome, mark.reason

    ticks = [
        event.tick
        for event in session.events
        if event.kind in ("tap_excluded", "tap_reason") and event.data["tap"] == 0
    ]
    assert [at(tick) for tick in ticks] == [
        ("excluded", "the operator asked for it again"),
        ("excluded", "struck twice"),
        ("excluded", "too hard"),
    ]
    assert at(ticks[0])[1] == "the operator asked for it again"  # and back again
    player.seek(player.duration_s)
    assert {tap: player.model.tap(tap).reason for tap in REASONS} == REASONS  # type: ignore[union-attr]
