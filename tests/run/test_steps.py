"""Every kind of step, carried out on the simulated boom."""

from __future__ import annotations

from collections.abc import Sequence

from running import boom, go

from rig.events import Event
from rig.run.runner import OperatorInput
from rig.steps import (
    Hold,
    Mark,
    Observe,
    Prompt,
    Ramp,
    Release,
    Repeat,
    Staircase,
    Sync,
    Tap,
    Zero,
)
from rig.verdicts import Condition, LevelVerdict, TapVerdict, Verdict

SECOND = 1_000_000


def held(tick: int, events: Sequence[Event]) -> list[Verdict]:
    """A body that is always held, settled and unknown to 0.1 1/s after each tap."""
    made: list[Verdict] = [Condition(tick, 30.0, 0.1, "held", True)]
    for event in events:
        if event.kind in ("quiet_end", "observe_end", "tap_end", "release_end"):
            made.append(LevelVerdict(tick, int(event.data["level"]), "held", "stable", 0.1))
        if event.kind == "tap_end":
            made.append(TapVerdict(tick, int(event.data["tap"]), 0, True, True, "returned", 0.8, 0.05))
    return made


def at_stop(tick: int, events: Sequence[Event]) -> list[Verdict]:
    made: list[Verdict] = [Condition(tick, 30.0, -0.07, "at_stop", True)]
    made += [
        LevelVerdict(tick, int(event.data["level"]), "at_stop", "undetermined", None)
        for event in events
        if event.kind in ("quiet_end", "tap_end")
    ]
    return made


def staircase(**options: object) -> Staircase:
    usual: dict[str, object] = {
        "levels_v": (3.0, 4.0),
        "directions": ("rising", "rising"),
        "settle_s": 0.2,
        "settle_at_most_s": 1.0,
        "quiet_s": 0.5,
        "taps_n_m_s": (1e-4, -1e-4),
        "tap_observe_s": 0.6,
    }
    return Staircase(**{**usual, **options})  # type: ignore[arg-type]


def test_staircase_in_order() -> None:
    run = go([staircase()], answer=held)
    assert run.outcome.exit_code == 0
    level = [
        "drive",
        "level",
        "settled",
        "quiet",
        "quiet_end",
        "tap",
        "tap_end",
        "tap",
        "tap_end",
        "level_end",
    ]
    kinds = [kind for kind in run.book.kinds() if kind != "notice"]
    assert kinds[:2] == ["run", "armed"]
    assert kinds[2 : 2 + 2 * len(level)] == level + level
    assert kinds[2 + 2 * len(level) :] == ["halt", "turning", "standstill", "finished"]
    # Every analysed interval was locked, and nobody wrote to the drive meanwhile.
    ends = [event for event in run.book.events if event.kind in ("quiet_end", "tap_end")]
    assert [event.data["writes"] for event in ends] == [0] * 6
    taps = run.book.of("tap")
    assert [event.data["impulse_n_m_s"] for event in taps] == [1e-4, -1e-4, 1e-4, -1e-4]
    for tap, end in zip(taps, run.book.of("tap_end"), strict=True):
        assert abs(end.tick - tap.tick - 0.6 * SECOND) <= 0.02 * SECOND
    assert run.book.of("standstill")[0].data["coast_s"] > 0.0
    assert run.bench.truth()["register_v"] == 0.0
    assert run.bench.truth()["flap_hz"] < 0.2


def test_drive_arrives_before_its_level_begins() -> None:
    run = go([staircase()], answer=held)
    for drive, level in zip(run.book.of("drive"), run.book.of("level"), strict=True):
        before = 0.0 if drive.data["target_v"] == 3.0 else 3.0
        assert level.tick - drive.tick >= 0.97 * (drive.data["target_v"] - before) * SECOND


def test_taps_that_teach_nothing_are_skipped() -> None:
    rising = go([staircase(taps_n_m_s=(1e-4, -1e-4, 1e-4, -1e-4))], answer=at_stop)
    # Two attempts a level, away from the lower stop.
    assert [event.data["impulse_n_m_s"] for event in rising.book.of("tap")] == [1e-4] * 4
    falling = go(
        [staircase(levels_v=(4.0, 3.5, 3.0), directions=("falling",) * 3, stop_after_lost=2)], answer=at_stop
    )
    assert falling.book.of("tap") == []
    assert len(falling.book.of("level")) == 2  # the third was not visited
    assert falling.outcome.exit_code == 0


def test_single_steps() -> None:
    steps = [
        Zero(for_s=0.2),
        Ramp(to_v=3.0, slew_v_per_s=1.0),
        Hold(for_s=0.3),
        Hold(until="settled", at_most_s=2.0),
        Mark(text="here"),
        Sync(),
        Observe(for_s=0.3),
        Tap(impulse_n_m_s=5e-5, observe_s=0.5),
        Release(angle_rad=0.1, observe_s=1.0),
        Repeat(times=2, steps=(Mark(text="again"),)),
    ]
    run = go(steps, answer=held)
    assert run.outcome.exit_code == 0
    assert [event.data["text"] for event in run.book.of("mark")] == ["here", "again", "again"]
    assert set(run.book.kinds()) >= {
        "zero",
        "sync",
        "observe",
        "observe_end",
        "tap",
        "release",
        "release_end",
    }
    zero = run.book.of("zero")[0].data
    assert abs(zero["load_n"] - 0.302 * 9.80665) < 0.05  # the weight of all that moves, by hand
    assert abs(zero["body_rad"] + 0.0698) < 0.002  # it lies on its lower stop, -4 deg
    release = run.book.of("release")[0]
    assert abs(run.book.of("release_end")[0].tick - release.tick - 1.0 * SECOND) <= 0.02 * SECOND


def test_hold_until_precise_taps_until_it_is() -> None:
    knowledge = {"half": 0.5}

    def learning(tick: int, events: Sequence[Event]) -> list[Verdict]:
        made: list[Verdict] = [Condition(tick, 30.0, 0.1, "held", True)]
        for event in events:
            if event.kind == "tap_end":
                knowledge["half"] *= 0.7
                made.append(LevelVerdict(tick, 0, "held", "stable", knowledge["half"]))
        return made

    hold = Hold(until="precise", precision_per_s=0.2, impulse_n_m_s=1e-4, tap_observe_s=0.5, at_most_s=30.0)
    run = go([Ramp(to_v=3.0), hold], answer=learning)
    impulses = [event.data["impulse_n_m_s"] for event in run.book.of("tap")]
    assert len(impulses) == 3  # 0.5 x 0.7^3 = 0.17
    assert [abs(impulse) for impulse in impulses] == [1e-4] * 3
    assert impulses[0] * impulses[1] < 0.0 < impulses[0] * impulses[2]


def test_prompts_wait_for_the_operator_but_not_for_ever() -> None:
    answered = go([Prompt(text="ready?", at_most_s=10.0)], acts={0.5: OperatorInput("acknowledge")})
    assert answered.person.heard == ["ready?"]
    assert 0.4 < answered.book.of("acknowledged")[0].data["waited_s"] < 0.7
    ignored = go([Prompt(text="ready?", at_most_s=1.0)])
    assert ignored.book.of("acknowledged")[0].data["waited_s"] >= 1.0


def test_hand_taps_are_prompted() -> None:
    run = go([Ramp(to_v=3.0), Tap(impulse_n_m_s=-1e-4, by="hand", observe_s=0.5)], answer=held)
    assert any("downward" in text and "rod" in text for text in run.person.heard)
    assert run.book.of("tap")[0].data["by"] == "hand"


def test_redo_leaves_the_tap_out_and_gives_it_again() -> None:
    run = go(
        [Ramp(to_v=3.0), Tap(impulse_n_m_s=1e-4, observe_s=1.0)],
        answer=held,
        acts={3.6: OperatorInput("redo", "a second hit")},
    )
    assert [event.data["tap"] for event in run.book.of("tap")] == [0, 1]
    assert run.book.of("tap_excluded")[0].data["reason"] == "a second hit"
    assert run.outcome.exit_code == 0


def test_the_operator_halts() -> None:
    run = go([Ramp(to_v=6.0), Hold(for_s=60.0)], acts={4.0: OperatorInput("halt")})
    assert run.outcome.exit_code == 3
    assert "operator" in run.outcome.reason
    assert run.book.of("halt")[0].data["cause"] == "operator"
    assert run.book.kinds()[-2:] == ["standstill", "finished"]
    assert run.bench.truth()["flap_hz"] < 0.2


def test_the_same_run_twice() -> None:
    one, two = (go([staircase()], boom(), answer=held) for _ in range(2))
    assert [frame.pack() for frame in one.book.frames] == [frame.pack() for frame in two.book.frames]
    assert one.book.events == two.book.events
