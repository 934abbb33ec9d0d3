"""How runs end: halts that only get harder, standstill, signals, and a runner that repeats itself exactly."""

from __future__ import annotations

import os
import signal
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from running import Analyst, Book, Person, boom, go

from drivers.clock import VirtualClock
from drivers.contract import Halt
from drivers.rows import RowBlock, Status
from rig.bench_source import bench_for, channel_table
from rig.events import Event
from rig.run import commands as cm
from rig.run.interlocks import Interlocks, Trip
from rig.run.loop import Loop
from rig.run.runner import FINISHED, STOPPING, TURNING, TURNING_AT_MOST_S, OperatorInput, Runner
from rig.run.turning import TurnCounter
from rig.run.winding import WindingModel, WindingState, read_state
from rig.steps import Hold, Protocol, Ramp, Staircase
from rig.verdicts import Condition, LevelVerdict, Verdict

RIG = boom()
TABLE = channel_table(RIG)
FRAME_TICKS = 20_000
ON = int(Status.ENABLED)


def block(number: int, status: int = 0) -> RowBlock:
    ticks = np.arange(20, dtype=np.uint64) * np.uint64(1000) + np.uint64(number * FRAME_TICKS)
    return RowBlock(tick=ticks, raw=np.zeros((20, len(TABLE)), dtype=np.int32), status=status)


def trip(cause: str, halt: Halt) -> Trip:
    return Trip(cause, f"{cause} went too far.", 2.0, 1.0, halt)


def halts(commands: Sequence[cm.Command]) -> list[Halt]:
    return [command.how for command in commands if isinstance(command, cm.HaltDrive)]


def started() -> Runner:
    """A runner in the middle of a hold at 6 V."""
    protocol = Protocol(name="test", title="", steps=(Ramp(to_v=6.0, slew_v_per_s=100.0), Hold(for_s=1e6)))
    runner = Runner(RIG, protocol, TABLE, 1_000_000)
    for number in range(50):
        runner.advance(block(number, ON), 10.0)
    return runner


ORDERS = [
    ((Halt.RAMP, Halt.COAST), [Halt.RAMP, Halt.COAST]),
    ((Halt.RAMP, Halt.BRAKE), [Halt.RAMP, Halt.BRAKE]),
    ((Halt.BRAKE, Halt.COAST), [Halt.BRAKE, Halt.COAST]),
    ((Halt.COAST, Halt.RAMP), [Halt.COAST]),
    ((Halt.COAST, Halt.BRAKE), [Halt.COAST]),
    ((Halt.BRAKE, Halt.RAMP), [Halt.BRAKE]),
]


@pytest.mark.parametrize(("asked", "given"), ORDERS)
def test_halts_only_get_harder(asked: tuple[Halt, Halt], given: list[Halt]) -> None:
    runner = started()
    ramping = ON | Status.RAMPING
    first = runner.advance(block(50, ramping), 10.0, trips=[trip("load", asked[0])])
    second = runner.advance(block(51, ramping), 10.0, trips=[trip("current", asked[1])])
    assert halts([*first, *second]) == given
    assert second[0].kind == "trip"  # written down whatever is done about it
    assert runner.state == STOPPING


def test_of_several_trips_the_hardest_halt_is_taken() -> None:
    both = [trip("load", Halt.RAMP), trip("current", Halt.COAST)]
    made = started().advance(block(50, ON), 10.0, trips=both)
    assert halts(made) == [Halt.COAST]
    assert [command.kind for command in made] == ["trip", "trip", "halt"]


def test_the_operator_can_cut_short_a_ramp_down() -> None:
    runner = started()
    ramping = ON | Status.RAMPING
    runner.advance(block(50, ramping), 10.0, trips=[trip("load", Halt.RAMP)])
    made = runner.advance(block(51, ramping), 10.0, operator=[OperatorInput("halt")])
    assert halts(made) == [RIG.halts["operator"]]


def test_frames_on_their_way_do_not_cut_a_ramp_short() -> None:
    """A link brings frames filled before the halt took effect: enabled, and not yet ramping."""
    runner = started()
    runner.advance(block(50, ON), 10.0, trips=[trip("load", Halt.RAMP)])
    took_effect = [Event(52 * FRAME_TICKS + 7000, "halt", {"how": "ramp"})]
    made = runner.advance(block(51, ON), 10.0, done=took_effect)
    made += runner.advance(block(52, ON), 10.0)
    assert made == [] and runner.state == STOPPING
    assert runner.advance(block(53, ON | Status.RAMPING), 10.0) == []
    made = runner.advance(block(54, ON), 10.0)
    assert halts(made) == [Halt.COAST] and runner.state == TURNING
    assert [command.kind for command in made] == ["", "turning"]


def test_a_halt_that_claims_to_be_far_ahead_is_not_waited_for() -> None:
    runner = started()
    runner.advance(block(50, ON), 10.0, trips=[trip("load", Halt.RAMP)])
    runner.advance(block(51, ON), 10.0, done=[Event(2**40, "halt", {"how": "ramp"})])
    for number in range(52, 120):
        runner.advance(block(number, ON), 10.0)
    assert runner.state == TURNING


def test_a_trip_while_the_crank_coasts_is_told_and_decides_the_exit_code() -> None:
    runner = Runner(RIG, Protocol(name="test", title="", steps=()), TABLE, 1_000_000)
    runner.advance(block(0), 5.0)
    runner.advance(block(1), 5.0)
    assert runner.state == TURNING
    made = runner.advance(block(2), 5.0, trips=[trip("travel", Halt.RAMP)])
    assert [command.kind for command in made] == ["trip"]
    for number in range(3, 60):
        made = runner.advance(block(number), 0.0)
        if runner.finished:
            break
    last = made[-1]
    assert isinstance(last, cm.Finish) and last.exit_code == 3 and "travel" in last.reason


def test_a_crank_that_never_stops_is_told() -> None:
    runner = started()
    runner.advance(block(50, ON), 10.0, operator=[OperatorInput("halt")])
    number, made = 51, []
    while runner.state != FINISHED:
        made = runner.advance(block(number), 3.0)
        number += 1
    assert (number - 51) * FRAME_TICKS == pytest.approx(1e6 * TURNING_AT_MOST_S, rel=0.01)
    last = made[-1]
    assert isinstance(last, cm.Finish) and last.exit_code == 3 and "still turns at 3.00 Hz" in last.reason
    assert runner.advance(block(number), 0.0) == []  # finished for good


def test_a_latch_is_seen_in_the_status_when_its_notice_is_lost() -> None:
    interlocks = Interlocks(RIG, TABLE, 1_000_000)
    assert interlocks.check(block(0)) == []
    found = interlocks.check(block(1, int(Status.LATCHED | Status.WATCHDOG)))
    assert [one.cause for one in found] == ["board"] and "watchdog" in found[0].sentence
    assert interlocks.check(block(2, int(Status.LATCHED | Status.WATCHDOG))) == []


def test_a_garbled_count_is_no_flap_rate() -> None:
    counter = TurnCounter(2048, 1_000_000)
    rates = []
    for k in range(100):
        garbled = 1 << 16 if k == 60 else 0
        rates.append(counter.add(20_000 * k, round(2048 * 25.0 * k * 0.02) + garbled))
    assert max(rates[5:]) < 25.2 and min(rates[10:]) > 24.8
    for k in range(100, 110):  # slipped for good, say by a loose coupling: that is seen
        rates.append(counter.add(20_000 * k, round(2048 * 25.0 * k * 0.02) + (1 << 16)))
    assert max(rates[100:]) > 100.0


class Interrupting(Person):
    """Presses Ctrl-C at given times, s."""

    def __init__(self, clock: VirtualClock, times: Sequence[float]) -> None:
        super().__init__(clock, {})
        self._times = list(times)

    def inputs(self) -> list[OperatorInput]:
        if self._times and self._clock.now_s() >= self._times[0]:
            self._times.pop(0)
            os.kill(os.getpid(), signal.SIGINT)
        return []


def interrupted(times: Sequence[float]) -> tuple[Any, Book, Any, Interrupting]:
    clock = VirtualClock()
    bench = bench_for(RIG, clock)
    person, book = Interrupting(clock, times), Book()
    protocol = Protocol(name="test", title="", steps=(Ramp(to_v=6.0), Hold(for_s=60.0)))
    outcome = Loop(bench, bench.open(), RIG, protocol, book, Analyst(), clock, None, person).run()
    return outcome, book, bench, person


def test_ctrl_c_halts_and_waits_for_standstill() -> None:
    before = signal.getsignal(signal.SIGINT)
    outcome, book, bench, person = interrupted([4.0])
    assert outcome.exit_code == 3 and "operator" in outcome.reason
    assert book.kinds()[-2:] == ["standstill", "finished"]
    assert any("standstill" in words for words in person.heard)
    assert bench.truth()["flap_hz"] < 0.2
    assert signal.getsignal(signal.SIGINT) is before


def test_a_second_ctrl_c_leaves_at_once_with_the_drive_off() -> None:
    outcome, book, bench, _ = interrupted([4.0, 4.2])
    assert outcome.exit_code == 3
    assert book.kinds()[-1] == "finished" and "standstill" not in book.kinds()
    assert bench.truth()["register_v"] == 0.0


def test_a_mistake_in_the_analysis_takes_the_drive_away() -> None:
    def broken(tick: int, _: Sequence[Event]) -> list[Verdict]:
        if tick > 4_000_000:
            raise ZeroDivisionError("a mistake")
        return []

    kept: list[Any] = []
    with pytest.raises(ZeroDivisionError):
        go([Ramp(to_v=6.0), Hold(for_s=60.0)], answer=broken, prepare=kept.append)
    kept[0].read(0.1)
    assert kept[0].truth()["register_v"] == 0.0


def test_the_same_inputs_give_the_same_commands() -> None:
    """The runner is pure: fed again with what it saw, it says the same, without bench, clock or journal."""
    seen: list[tuple[Any, ...]] = []
    said: list[list[cm.Command]] = []

    def held(tick: int, events: Sequence[Event]) -> list[Verdict]:
        made: list[Verdict] = [Condition(tick, 30.0, 0.1, "held", True)]
        return made + [
            LevelVerdict(tick, int(event.data["level"]), "held", "stable", 0.1)
            for event in events
            if event.kind in ("quiet_end", "tap_end")
        ]

    steps = (
        Staircase(levels_v=(3.0, 4.0), directions=("rising",) * 2, settle_s=0.2, quiet_s=0.4,
                  taps_n_m_s=(1e-4, -1e-4), tap_observe_s=0.5),
    )  # fmt: skip
    clock = VirtualClock()
    bench = bench_for(RIG, clock)
    protocol = Protocol(name="test", title="", steps=steps)
    person = Person(clock, {6.2: OperatorInput("redo", "double hit")})
    hello = bench.open()
    loop = Loop(bench, hello, RIG, protocol, Book(), Analyst(held), clock, None, person)
    advance = loop.runner.advance

    def spy(*given: Any) -> list[cm.Command]:
        seen.append(given)
        said.append(advance(*given))
        return said[-1]

    loop.runner.advance = spy  # type: ignore[method-assign]
    assert loop.run().exit_code == 0
    again = Runner(RIG, protocol, hello.channels, hello.tick_hz)
    assert [again.advance(*given) for given in seen] == said
    assert sum(len(commands) for commands in said) > 20


def test_redo_just_after_a_tap_gives_it_again() -> None:
    """Between the end of a tap and its verdict, and once only however often the key is pressed."""
    runner = started()
    protocol = Protocol(
        name="test",
        title="",
        steps=(
            Staircase(levels_v=(3.0,), directions=("rising",), settle_s=0.0, settle_at_most_s=0.1,
                      quiet_s=0.0, taps_n_m_s=(1e-4,), tap_observe_s=0.5, slew_v_per_s=100.0),
        ),
    )  # fmt: skip
    runner = Runner(RIG, protocol, TABLE, 1_000_000)
    kinds: list[str] = []
    ended = None
    for number in range(400):
        verdicts = [Condition(number * FRAME_TICKS, 30.0, 0.1, "held", True)]
        inputs = [OperatorInput("redo")] if ended is not None and number in (ended + 2, ended + 3) else []
        made = runner.advance(block(number, ON), 10.0, verdicts, operator=inputs)
        kinds += [command.kind for command in made if command.kind]
        if ended is None and "tap_end" in kinds:
            ended = number
        if runner.state != "running":
            break
    assert [kind for kind in kinds if kind.startswith("tap")] == [
        "tap", "tap_end", "tap_excluded", "tap", "tap_end"
    ]  # fmt: skip
    assert kinds[-2:] == ["level_end", "halt"]


def test_the_winding_outlives_the_program(tmp_path: Path) -> None:
    """By hand: a hot body cools towards the air with the slower of its two time constants, and never below."""
    motor = RIG.motor
    assert motor is not None
    hot = WindingState(90.0, 60.0, 1000.0)
    hot.write(tmp_path / "winding.json")
    state = read_state(tmp_path / "winding.json")
    assert state == hot
    cooled = [WindingModel(motor, 110.0) for _ in range(4)]
    for model, later_s in zip(cooled, (0.0, 60.0, 1e5, -50.0), strict=True):
        model.resume(hot, 1000.0 + later_s)
    now, minute, day, set_back = (model.winding_deg_c for model in cooled)
    assert now == 90.0 and set_back == 90.0
    assert motor.ambient_deg_c < minute < 90.0
    assert day == pytest.approx(motor.ambient_deg_c, abs=0.5)
    assert cooled[1].state(1060.0).utc_s == 1060.0


@pytest.mark.parametrize("text", ["", "{", "[]", '{"winding_deg_c": 25}',
                                  '{"winding_deg_c": NaN, "housing_deg_c": 25, "utc_s": 0}'])  # fmt: skip
def test_an_unreadable_winding_state_means_hot(tmp_path: Path, text: str) -> None:
    path = tmp_path / "winding.json"
    path.write_text(text)
    assert read_state(path) is None
    assert read_state(tmp_path / "nothing.json") is None


def test_a_hot_motor_trips_when_the_loop_is_told_of_it() -> None:
    clock = VirtualClock()
    rig = replace(RIG, limits=replace(RIG.limits, winding_deg_c=80.0))
    assert rig.motor is not None
    winding = WindingModel(rig.motor, 80.0)
    winding.resume(WindingState(95.0, 60.0, 0.0), 0.0)
    bench = bench_for(rig, clock)
    protocol = Protocol(name="test", title="", steps=(Ramp(to_v=6.0), Hold(for_s=10.0)))
    loop = Loop(bench, bench.open(), rig, protocol, Book(), Analyst(), clock, winding=winding, by="A. Person")
    outcome = loop.run()
    assert outcome.exit_code == 3 and "inding temperature" in outcome.reason
