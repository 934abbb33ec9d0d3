"""After a trip: wait, go on at the same level as a new visit, or end; and the operator's way through the taps."""

from __future__ import annotations

from running import Run, go
from test_steps import held, staircase

from drivers.simulated.faults import Faults
from rig.run import actions as ac
from rig.run.going_on import from_the_drive
from rig.run.inputs import OperatorInput


def levels(run: Run) -> list[tuple[int, float]]:
    return [(event.data["level"], event.data["drive_v"]) for event in run.book.of("level")]


def guard(at_s: float, closed_s: float) -> object:
    def prepare(bench: object) -> None:
        bench.faults.at(round(at_s * 1e6), Faults.open_guard)  # type: ignore[attr-defined]
        bench.faults.at(round(closed_s * 1e6), Faults.close_guard)  # type: ignore[attr-defined]

    return prepare


def tripped(**acts: OperatorInput) -> Run:
    """Two levels; the guard is opened at 5 s, in the first, and closed at 6 s."""
    times = {float(name.removeprefix("at_")): one for name, one in acts.items()}
    return go(
        [staircase()],
        answer=held,
        acts=times,
        prepare=guard(5.0, 6.0),  # type: ignore[arg-type]
        may_go_on=True,
    )


def test_going_on_begins_the_same_level_again() -> None:
    run = tripped(at_40=OperatorInput("go_on"))
    kinds = run.book.kinds()
    assert run.outcome.exit_code == 0 and run.outcome.reason == "done"
    order = [kind for kind in kinds if kind in ("trip", "halt", "standstill", "waiting", "rearmed", "armed")]
    assert order == [
        "armed",
        "trip",
        "halt",
        "standstill",
        "waiting",
        "rearmed",
        "armed",
        "halt",
        "standstill",
    ]
    visits = levels(run)
    assert [volts for _, volts in visits] == [3.0, 3.0, 4.0]
    assert len({number for number, _ in visits}) == 3
    rearmed = run.book.of("rearmed")[0]
    again = [event for event in run.book.events if event.tick > rearmed.tick]
    assert [event.kind for event in again].count("tap") == 4  # all of the level, not what was left of it
    assert [event.data["writes"] for event in again if event.kind in ("tap_end", "quiet_end")] == [0] * 6


def test_the_operator_may_end_it_instead() -> None:
    run = tripped(at_40=OperatorInput("end"))
    assert run.outcome.exit_code == 3 and "switched the drive off" in run.outcome.reason
    assert run.book.kinds()[-2:] == ["waiting", "finished"]
    assert len(levels(run)) == 1


def test_a_board_that_refuses_is_told_and_waited_for() -> None:
    """The guard is still open when the operator first wants to go on."""
    run = go(
        [staircase()],
        answer=held,
        acts={40.0: OperatorInput("go_on"), 60.0: OperatorInput("go_on")},
        prepare=guard(5.0, 50.0),  # type: ignore[arg-type]
        may_go_on=True,
    )
    assert run.outcome.exit_code == 0
    assert "guard" in run.book.of("refused")[0].data["reason"]
    assert any("guard" in text for text in run.person.heard)
    assert len(run.book.of("rearmed")) == 1


def test_a_second_trip_after_going_on_counts() -> None:
    def prepare(bench: object) -> None:
        for at_s in (5.0, 45.0):
            guard(at_s, at_s + 1.0)(bench)  # type: ignore[operator]

    run = go(
        [staircase()],
        answer=held,
        acts={40.0: OperatorInput("go_on"), 80.0: OperatorInput("end")},
        prepare=prepare,  # type: ignore[arg-type]
        may_go_on=True,
    )
    assert run.outcome.exit_code == 3
    assert len(run.book.of("trip")) == 2 and len(run.book.of("waiting")) == 2


def test_without_somebody_there_a_trip_ends_the_run() -> None:
    run = go([staircase()], answer=held, prepare=guard(5.0, 6.0))  # type: ignore[arg-type]
    assert run.outcome.exit_code == 3 and "waiting" not in run.book.kinds()


def test_an_operators_halt_can_be_gone_on_from_too() -> None:
    run = go(
        [staircase()],
        answer=held,
        acts={5.0: OperatorInput("halt"), 40.0: OperatorInput("go_on")},
        may_go_on=True,
    )
    assert run.outcome.exit_code == 0 and [volts for _, volts in levels(run)] == [3.0, 3.0, 4.0]


def test_enough_of_a_level_skips_what_is_left_of_it() -> None:
    run = go([staircase()], answer=held, acts={4.0: OperatorInput("next")})
    taps = [event.data["level"] for event in run.book.of("tap")]
    assert taps.count(0) == 1 and taps.count(1) == 2
    assert run.outcome.exit_code == 0 and len(run.book.of("level_end")) == 2


def test_a_rejected_tap_is_not_given_again() -> None:
    run = go([staircase()], answer=held, acts={8.0: OperatorInput("reject", "touched the boom")})
    excluded = run.book.of("tap_excluded")
    assert [event.data["reason"] for event in excluded] == ["touched the boom"]
    assert len(run.book.of("tap")) == 4


def reasons(run: Run) -> list[tuple[int, str]]:
    return [(event.data["tap"], event.data["reason"]) for event in run.book.of("tap_reason")]


def test_why_a_tap_was_left_out_is_told_after_it_was() -> None:
    """Without a number it is the last one left out; the course goes on as if nothing had been said."""
    acts = {8.0: OperatorInput("reject"), 8.5: OperatorInput("reason", "struck twice")}
    run, silent = (go([staircase()], answer=held, acts=dict(list(acts.items())[:n])) for n in (2, 1))
    (excluded,) = run.book.of("tap_excluded")
    assert excluded.data["reason"] == "rejected by the operator"
    assert reasons(run) == [(excluded.data["tap"], "struck twice")]
    kinds = [kind for kind in run.book.kinds() if kind != "tap_reason"]
    assert kinds == silent.book.kinds() and run.outcome == silent.outcome


def test_a_reason_names_its_tap_and_may_be_changed() -> None:
    """The tap that is given again is under way, or taken back too, when the words for the first one come."""
    run = go(
        [staircase(taps_n_m_s=(1e-4,) * 3, tap_observe_s=3.0)],
        answer=held,
        acts={
            6.0: OperatorInput("redo"),
            7.0: OperatorInput("reject"),
            7.5: OperatorInput("reason", "the cable was touched", tap=0),
            7.6: OperatorInput("reason", "too hard"),
            7.7: OperatorInput("reason", "wrong way", tap=0),
        },
    )
    assert [event.data["tap"] for event in run.book.of("tap_excluded")] == [0, 1]
    assert reasons(run) == [(0, "the cable was touched"), (1, "too hard"), (0, "wrong way")]


def test_a_reason_in_the_same_frame_as_its_tap_is_taken() -> None:
    acts = {7.999: OperatorInput("reject"), 8.0: OperatorInput("reason", "too gentle")}
    run = go([staircase()], answer=held, acts=acts)
    assert [words for _, words in reasons(run)] == ["too gentle"]
    assert run.book.of("tap_reason")[0].tick == run.book.of("tap_excluded")[0].tick


def test_a_reason_for_nothing_is_refused_in_a_note() -> None:
    run = go(
        [staircase()],
        answer=held,
        acts={
            7.0: OperatorInput("reason", "too hard"),  # nothing is left out yet
            8.0: OperatorInput("reject"),
            8.2: OperatorInput("reason", "too hard", tap=77),
            8.4: OperatorInput("reason", ""),
        },
    )
    assert reasons(run) == [] and run.outcome.exit_code == 0
    told = [event.data["reason"] for event in run.book.of("refused")]
    assert len(told) == 3 and "no tap has been left out" in told[0]
    assert "tap 77 has not been left out" in told[1] and "without words" in told[2]


def test_a_reason_is_taken_while_the_run_waits_after_a_halt() -> None:
    run = go(
        [staircase()],
        answer=held,
        acts={
            5.0: OperatorInput("reject"),
            5.2: OperatorInput("halt"),
            5.3: OperatorInput("reason", "wrong way"),  # the crank still turns
            40.0: OperatorInput("reason", "too hard"),
            41.0: OperatorInput("end"),
        },
        may_go_on=True,
    )
    assert [words for _, words in reasons(run)] == ["wrong way", "too hard"]
    ticks = {kind: run.book.of(kind)[0].tick for kind in ("halt", "standstill", "waiting")}
    first, second = (event.tick for event in run.book.of("tap_reason"))
    assert ticks["halt"] < first < ticks["standstill"] and ticks["waiting"] < second
    assert run.book.kinds()[-1] == "finished"


def test_where_a_course_goes_on() -> None:
    ramp, other = ac.GoTo(to_v=1.0, slew_v_per_s=1.0), ac.GoTo(to_v=2.0, slew_v_per_s=1.0)
    level = ac.BeginLevel(level=0, direction="rising", drive_v=1.0, role="level")
    later = ac.BeginLevel(level=1, direction="rising", drive_v=2.0, role="level")
    course = (ac.ReadZero(for_s=1.0), ramp, level, ac.Wait(for_s=1.0), ac.EndLevel(level=0), other, later)
    again, at = from_the_drive(course, 3, level)
    assert at == 1 and again[2].level == 2 and again[4].level == 2  # type: ignore[attr-defined]
    assert from_the_drive(course, 5, None)[1] == 5
    assert from_the_drive(course, 0, None) == (course, 0)


def test_a_latch_that_shows_first_in_a_refusal_is_told_as_what_it_is() -> None:
    """The board latches between a frame and the command that follows it."""

    def prepare(bench: object) -> None:
        drive = bench.drive  # type: ignore[attr-defined]

        def latched_first(target_v: float, slew_v_per_s: float) -> int:
            if target_v == 4.0:
                bench.faults.open_guard()  # type: ignore[attr-defined]
            return int(drive(target_v, slew_v_per_s))

        bench.drive = latched_first  # type: ignore[attr-defined]

    run = go([staircase()], answer=held, prepare=prepare)  # type: ignore[arg-type]
    assert run.outcome.exit_code == 3
    assert "switched the drive off by itself (guard)" in run.outcome.reason
    assert [event.data["cause"] for event in run.book.of("trip")] == ["board"]
    assert run.book.kinds()[-1] == "finished"


def test_a_refusal_nobody_explains_is_a_trip_of_its_own() -> None:
    from drivers.errors import BenchRefused

    def prepare(bench: object) -> None:
        def refuse(target_v: float, slew_v_per_s: float) -> int:
            raise BenchRefused("the register is out of order")

        bench.drive = refuse  # type: ignore[attr-defined]

    run = go([staircase()], answer=held, prepare=prepare)  # type: ignore[arg-type]
    assert run.outcome.exit_code == 3 and "the register is out of order" in run.outcome.reason
    assert [event.data["cause"] for event in run.book.of("trip")] == ["refused"]
