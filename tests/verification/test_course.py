"""Events in order, each begin with its end: every run's are let pass, and what no run could write is told."""

from __future__ import annotations

import re

import pytest

from rig import events
from rig.events import READ, Event, unreadable
from rig.verification.course import bracket_problems, event_problems, loss_event_problems, open_at_end

HZ = 1000


def test_the_kinds_are_those_of_the_table() -> None:
    table = events.__doc__ or ""
    rows = table[table.index("\nkind ") :].splitlines()[3:]
    assert {row.split()[0] for row in rows if re.match(r"[a-z]", row)} == events.KINDS
    assert set(READ) <= events.KINDS


def made(text: str) -> list[Event]:
    """ "level0 tap3 tap_end3 halt!" at ticks 1000, 2000 ...; "!" is the end of the protocol."""
    found = []
    for index, word in enumerate(text.split()):
        kind, number, end = re.fullmatch(r"([a-z_]+)(\d*)(!?)", word).groups()  # type: ignore[union-attr]
        data = {"cause": "end of the protocol" if end else "operator"} if kind == "halt" else {}
        if number:
            data["tap" if "tap" in kind or "release" in kind else "level"] = int(number)  # type: ignore[assignment]
        found.append(Event(1000 * (index + 1), kind, data))
    return found


@pytest.mark.parametrize(
    "text",
    [
        "",
        "run zero armed drive level0 settled0 quiet0 quiet_end0 tap0 tap_end0 level_end0 drive halt! finished",
        "level0 release0 release_end0 observe0 observe_end0 level_end0 level1 level_end1 halt!",
        "tap0 tap_end0 observe0 observe_end0 halt!",  # outside of any level
        "level0 tap0 mark notice loss prompt tap_excluded0 halt turning standstill finished",  # cut short
        "level0 quiet0 trip halt trip finished",
        "level0 tap0",  # cut off
        "level0 tap0 tap_end0 tap_excluded0 tap1 tap_reason0 tap_end1 level_end0 halt!",
    ],
)
def test_what_a_run_writes(text: str) -> None:
    assert bracket_problems(made(text)) == []


@pytest.mark.parametrize(
    ("text", "problems"),
    [
        ("level0 tap0 tap1 tap_end1 level_end0", ["'tap 0' at tick 2000 has no end"]),
        ("level0 tap0 level_end0", ["'tap 0' at tick 2000 has no end"]),
        ("level0 tap0 tap_end1", ["'tap end 1' at tick 3000 has no beginning"]),
        ("level0 quiet0 observe_end0", ["'observe end 0' at tick 3000 has no beginning"]),
        ("quiet_end0 quiet_end0", ["at tick 1000 has no beginning", "at tick 2000 has no beginning"]),
        ("level0 level1", ["'level 0' at tick 1000 has no end"]),
        ("level0 level_end1", ["'level end 1' at tick 2000 has no beginning"]),
        (
            "level0 tap0 halt! finished",
            ["'tap 0' at tick 2000 has no end", "'level 0' at tick 1000 has no end"],
        ),
        ("settled0", ["'settled 0' at tick 1000 belongs to no level"]),
        ("level0 tap0 halt tap_end0", ["'tap end 0' at tick 4000 has no beginning"]),
    ],
)
def test_what_none_could_write(text: str, problems: list[str]) -> None:
    found = bracket_problems(made(text))
    assert len(found) == len(problems)
    for told, words in zip(found, problems, strict=True):
        assert words in told


@pytest.mark.parametrize(
    ("text", "still_open"),
    [
        ("level0 tap0", ["'tap 0' at tick 2000", "'level 0' at tick 1000"]),
        ("level0 tap0 tap_end0", ["'level 0' at tick 1000"]),
        ("level0 tap0 halt", []),
        ("level0 tap0 unread", []),
    ],
)
def test_what_is_open_at_the_end(text: str, still_open: list[str]) -> None:
    found = open_at_end(made(text))
    assert found == [f"the event {one}" for one in still_open]


@pytest.mark.parametrize(
    ("text", "problems"),
    [
        ("level0 tap0 unread tap_end0 level_end0 halt!", 0),
        ("level0 unread settled1 tap3 tap_end3 level_end1 level2 level_end2 halt!", 0),
        ("level0 unread tap_end0 tap_end1 level_end0", 1),  # one interval may end that began in it, not two
        ("level0 unread level_end0 level_end1", 1),
        ("unread level0 settled0 level_end0 settled0", 1),
    ],
)
def test_behind_what_could_not_be_read(text: str, problems: int) -> None:
    assert len(bracket_problems(made(text))) == problems


def test_losses_around_what_could_not_be_read() -> None:
    told = [Event(10, "loss", {"rows": 4, "frames": 1, "overruns": 0})]
    assert len(loss_event_problems(told, [(50, 3, 1, 0)], 1000)) == 2
    assert loss_event_problems(told, [(50, 3, 1, 0)], 1000, [(5, 50)]) == []
    assert len(loss_event_problems(told, [(50, 3, 1, 0)], 1000, [(20, None)])) == 1


def test_time_and_order() -> None:
    span = (5000, 9000)
    good = [Event(4500, "mark"), Event(9900, "halt"), Event(9000, "turning"), Event(9000, "finished")]
    assert event_problems(good, span, HZ) == []
    assert event_problems([Event(3999, "mark")], span, HZ) == [
        "the event 'mark' at tick 3999 lies outside the recording"
    ]
    assert len(event_problems([Event(10001, "mark")], span, HZ)) == 1
    assert event_problems([Event(10001, "mark")], None, HZ) == []
    assert (
        "comes after one of tick 9000"
        in event_problems([Event(9000, "mark"), Event(7999, "mark")], span, HZ)[0]
    )
    (told,) = event_problems([Event(6000, "mqrk")], span, HZ)
    assert "no known kind" in told
    late = [
        Event(6000, "finished"),
        Event(6001, "armed"),
        Event(6002, "drive", {"target_v": 1.0}),
        Event(6003, "finished"),
    ]
    assert len(event_problems(late, span, HZ)) == 3


def test_losses_told_and_counted() -> None:
    counts = {"rows": 20, "frames": 1, "overruns": 0}
    assert loss_event_problems([Event(7, "loss", counts)], [(7, 20, 1, 0)], 100) == []
    assert "not told by the run" in loss_event_problems([], [(7, 20, 1, 0)], 100)[0]
    assert "frames show 40 rows" in loss_event_problems([Event(7, "loss", counts)], [(7, 40, 1, 0)], 100)[0]
    assert "frames show none" in loss_event_problems([Event(7, "loss", counts)], [], 100)[0]
    # Cut off after the loss was told and before its frame was written.
    assert loss_event_problems([Event(101, "loss", counts)], [], 100) == []


@pytest.mark.parametrize(
    ("kind", "data", "name"),
    [
        ("level", {"level": 0, "direction": "rising"}, "drive_v"),
        ("level", {"level": 0.5, "direction": "rising", "drive_v": 3}, "level"),
        ("tap", {"tap": 0, "impulse_n_m_s": "1"}, "impulse_n_m_s"),
        ("tap_excluded", {"tap": 0}, "reason"),
        ("tap_reason", {"tap": None, "reason": "too hard"}, "tap"),
        ("quiet_end", {"writes": "none"}, "writes"),
    ],
)
def test_events_the_analysis_could_not_go_by(kind: str, data: dict[str, object], name: str) -> None:
    assert f"as {name}" in unreadable(Event(3, kind, data))


def test_events_it_can() -> None:
    assert unreadable(Event(3, "level", {"level": 0, "direction": "rising", "drive_v": 3})) == ""
    assert unreadable(Event(3, "tap", {"tap": 0, "impulse_n_m_s": None})) == ""
    assert unreadable(Event(3, "mark", {})) == ""
