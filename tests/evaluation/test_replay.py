"""A session cut in any way tells what its run told: the same verdicts, the same results."""

from __future__ import annotations

import json
from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from short_sessions import KINDS, make

from drivers.rows import RowBlock
from rig.command.sessions import analyse_session, session_rig
from rig.evaluation.replay import Replay, replay
from rig.events import Event
from rig.session import Session, open_session
from rig.verdicts import Verdict, verdict_to_json


@pytest.fixture(scope="module", params=KINDS)
def session(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Session]:
    path = make(request.param, tmp_path_factory.mktemp("replay") / "a.h5")
    with open_session(path) as opened:
        yield opened


def gone_through(session: Session, rows_per_block: int) -> tuple[list[dict[str, Any]], dict[str, Any]]:
    again = Replay(session_rig(session), session.streams["board"], session.events)
    steps = list(again.steps(rows_per_block))
    assert [event for step in steps for event in step.events] == session.events
    assert [verdict for step in steps for verdict in step.verdicts] == again.verdicts
    return [verdict_to_json(verdict) for verdict in again.verdicts], again.finish().to_json()


def test_blocks_of_any_size_tell_what_the_run_told(session: Session) -> None:
    """Exact, to the last bit: a simulated run depends on ticks alone."""
    made = {size: gone_through(session, size) for size in (1, 7, 997, 100_000)}
    verdicts, results = made[1]
    for size in (7, 997, 100_000):
        assert made[size][0] == verdicts
        assert made[size][1] == results
    live = session.results["live"]
    assert len(live) > 50

    def in_order(told: list[dict[str, Any]]) -> list[dict[str, Any]]:
        return sorted(told, key=lambda one: (one["tick"], one["kind"]))

    assert in_order(live) == in_order(verdicts)
    assert json.loads(json.dumps(results)) == session.results["final"]
    assert analyse_session(session, session_rig(session)).to_json() == results


def test_the_sessions_hold_what_they_are_for(session: Session) -> None:
    kinds = {event.kind for event in session.events}
    lossy, halted = bool(session.losses), "tap_excluded" in kinds
    assert lossy or halted or kinds >= {"release", "prompt", "sync", "observe", "mark"}
    if lossy:
        assert "loss" in kinds and session.results["final"]["losses"]["rows"] > 0
    if halted:
        (halt,) = (event for event in session.events if event.kind == "halt")
        assert halt.data["cause"] == "operator"
    assert {verdict["kind"] for verdict in session.results["live"]} == {"condition", "tap", "level"}


class Notebook:
    """Notes what it is fed, and checks that nothing comes before its time."""

    def __init__(self) -> None:
        self.rows: list[int] = []
        self.lost = 0
        self.order: list[tuple[str, int]] = []

    def feed(self, blocks: Sequence[RowBlock], events: Sequence[Event]) -> list[Verdict]:
        for block in blocks:
            assert len(block)
            self.rows += [int(tick) for tick in block.tick]
            self.lost += block.lost_rows
            self.order += [("row", int(tick)) for tick in block.tick]
        self.order += [("event", event.tick) for event in events]
        return []


@given(
    st.lists(st.integers(1, 6), max_size=12),
    st.lists(st.integers(0, 60), max_size=12),
    st.integers(1, 3),
)
def test_events_come_between_the_rows_they_came_between(
    lengths: list[int], ticks: list[int], period: int
) -> None:
    """Any blocks, any events, some out of order and some after the last row: all once, each in its place."""
    blocks, tick = [], 4
    for lost, rows in enumerate(lengths):
        at = np.arange(tick, tick + rows * period, period, dtype=np.uint64)
        blocks.append(RowBlock(at, np.zeros((rows, 1), dtype=np.int32), lost_rows=lost))
        tick += rows * period
    book = Notebook()
    list(replay(book, blocks, [Event(when, "mark") for when in ticks]))
    assert book.rows == [int(t) for block in blocks for t in block.tick]
    assert book.lost == sum(range(len(lengths)))
    assert [when for what, when in book.order if what == "event"] == ticks
    latest = 0  # no event is given before one that stands before it
    wanted = []
    for when in ticks:
        latest = max(latest, when)
        wanted.append(sum(row <= latest for row in book.rows))
    found, rows = [], 0
    for what, _ in book.order:
        rows += what == "row"
        if what == "event":
            found.append(rows)
    assert found == wanted
