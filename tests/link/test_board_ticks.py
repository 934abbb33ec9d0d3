"""Ticks of a board that runs for days, heartbeats, and what the driver makes of answers and odd rows."""

from __future__ import annotations

import struct
from dataclasses import replace

import numpy as np
import pytest
from scripted_board import ScriptedBoard, hello_for
from simulated_rigs import make_bench
from wired import wired

from drivers.board import ANSWER_S, TRIES, BoardBench
from drivers.channels import Channel, ChannelTable
from drivers.contract import Halt
from drivers.errors import BenchMisuse, BenchRefused, LinkError, LinkTimeout
from drivers.link import messages as ms
from drivers.rows import RowFrame
from drivers.simulated.world import BoardFacts

CHANNELS = ChannelTable((Channel("one", "other", "1", 1.0),))
PERIOD, ROWS = 1000, 8


class LongRun:
    """A board that has been up for `tick`, unwrapped; frames may be left out between those that are sent."""

    def __init__(self, tick: int) -> None:
        self.board = ScriptedBoard(hello_for(CHANNELS), ("i32",))
        self.tick = tick  # of the next row
        self.board.greet = self._greet
        self.bench: BoardBench = self.board.bench

    def _greet(self) -> None:
        self.board.say(ms.HelloText(ms.VERSION, self.board.text))
        self.frame()

    def frame(self) -> None:
        row = self.tick // PERIOD
        raw = np.arange(row, row + ROWS, dtype=np.int64)[:, None].astype(np.int32)
        self.board.say(
            ms.Rows(
                RowFrame(
                    row // ROWS & 0xFFFFFFFF, self.tick & 0xFFFFFFFF, PERIOD, row & 0xFFFFFFFF, 0, 0, raw
                ).pack()
            )
        )
        self.tick += ROWS * PERIOD

    def skip(self, frames: int) -> None:
        self.tick += frames * ROWS * PERIOD


def test_days_of_rows_answers_and_notices() -> None:
    """Half an hour lost at a time, for a week: 140 wraps of a clock of 1 MHz."""
    run = LongRun(5 * ROWS * PERIOD)
    run.bench.open()
    run.bench.read(0.01)
    # Answers name ticks a little ahead of the newest row; notices a little before it or after.
    run.board.obey = lambda command: run.board.answer(command, run.tick + 700)
    rng = np.random.default_rng(2)
    while run.tick < 7 * 86_400 * 1_000_000:
        run.skip(int(rng.integers(1, 225_000)))
        begin = run.tick
        run.frame()
        assert run.bench.halt(Halt.COAST) == run.tick + 700
        for offset in (-4000, -1, 0, 1, 900, 2_000_000):
            run.board.say(ms.BoardNotice(run.tick + offset & 0xFFFFFFFF, "sync_edge"))
        reading = run.bench.read(0.01)
        more = run.bench.read(0.01)
        (block,) = reading.blocks
        assert block.tick.tolist() == list(range(begin, begin + ROWS * PERIOD, PERIOD))
        assert block.raw[:, 0].tolist() == [tick // PERIOD for tick in block.tick.tolist()]
        notices = [*reading.notices, *more.notices]
        assert [one.tick - run.tick for one in notices] == [-4000, -1, 0, 1, 900, 2_000_000]
    assert run.tick >> 32 > 135


@pytest.mark.parametrize("before", range(-3, 4))
def test_at_the_wrap_itself(before: int) -> None:
    """Frames, answers and notices on this and on that side of it, in every combination."""
    first = (2**32 // PERIOD // ROWS + before) * ROWS * PERIOD
    shift = 2**32 if first >= 2**32 else 0  # a host counts from the first tick it hears, which is below 2**32
    run = LongRun(first)
    run.bench.open()
    for _ in range(6):
        for offset in (-20_000, -3000, 0, 3000, 20_000):
            run.board.obey = lambda command, tick=run.tick + offset: run.board.answer(command, tick)
            assert run.bench.lock() == max(run.tick + offset - shift, 0)
        run.frame()
        ticks = np.concatenate([block.tick for block in run.bench.read(0.01).blocks]).astype(np.int64)
        assert np.all(np.diff(ticks) == PERIOD)


@pytest.mark.parametrize("tick", [40_000, 2**31 - 16_000, 2**31 + 80_000, 2**32 - 80_000])
def test_a_notice_before_the_first_row_has_its_place(tick: int) -> None:
    run = LongRun(tick // (ROWS * PERIOD) * ROWS * PERIOD)

    def greet() -> None:
        run.board.say(ms.HelloText(ms.VERSION, run.board.text))
        run.board.say(ms.BoardNotice(run.tick - 500, "sync_edge"))
        run.frame()

    run.board.greet = greet
    run.bench.open()
    reading = run.bench.read(0.01)
    assert [one.tick for one in reading.notices] == [int(reading.blocks[0].tick[0]) - 500]


def test_a_real_conversation_across_the_wrap() -> None:
    facts = BoardFacts(boot_tick=2**32 - 300_000)
    bench, _ = wired(lambda clock: make_bench(clock=clock, board=facts))
    bench.open()
    ticks, answers = [], []
    for _ in range(30):
        reading = bench.read(0.02)
        ticks += [int(tick) for block in reading.blocks for tick in block.tick]
        answers.append((bench.halt(Halt.COAST), ticks[-1]))
        bench.heartbeat()
    assert np.all(np.diff(ticks) == 1000) and ticks[-1] > 2**32 > ticks[0]
    assert all(0 <= tick - newest < 50_000 for tick, newest in answers)
    bench.close()


# Heartbeats


def test_a_heartbeat_names_the_newest_row_that_was_read() -> None:
    """Not the newest that came: those that wait for the next read have passed no interlock."""
    run = LongRun(2**32 - 64_000)
    run.bench.open()

    def beats() -> list[int]:
        return [message.tick for message in run.board.heard if isinstance(message, ms.Heartbeat)]

    run.bench.heartbeat()  # nothing was read: nothing can be said
    assert beats() == []
    for _ in range(10):
        newest = int(run.bench.read(0.01).blocks[-1].tick[-1])
        run.frame()
        run.bench.lock()  # the frame comes meanwhile
        run.bench.heartbeat()
        run.bench.heartbeat()
        assert beats()[-2:] == [newest & 0xFFFFFFFF] * 2
    assert beats()[-1] < 2**31 < beats()[0]


# Answers


def test_what_an_answer_says_becomes_the_error_it_is() -> None:
    run = LongRun(0)
    run.bench.open()
    for result, reason, error, words in (
        (ms.Result.REFUSED, "the guard is open", BenchRefused, "the guard is open"),
        (ms.Result.REFUSED, "", BenchRefused, "the board refused, without a reason"),
        (ms.Result.LACKING, "", BenchMisuse, "the bench lacks that part"),
        (ms.Result.LACKING, "no tapper", BenchMisuse, "no tapper"),
    ):
        run.board.obey = lambda command, result=result, reason=reason: run.board.say(
            ms.Answer(command.number, result, 0, 0, reason)
        )
        with pytest.raises(error, match=words):
            run.bench.tap(1e-5)


def test_what_a_board_does_not_have_is_not_asked_of_it() -> None:
    lacking = replace(hello_for(CHANNELS).capabilities, tapper=False, sync=False, release=False)
    run = LongRun(0)
    run.board = ScriptedBoard(hello_for(CHANNELS, capabilities=lacking), ("i32",))
    run.board.greet = run._greet
    bench = run.board.bench
    bench.open()
    for command in (lambda: bench.tap(1.0), bench.sync, lambda: bench.release(0.1)):
        with pytest.raises(BenchMisuse, match="the bench has no"):
            command()
    assert not any(isinstance(message, ms.Command) for message in run.board.heard)


def test_a_value_that_single_precision_cannot_hold_is_refused_here() -> None:
    run = LongRun(0)
    run.bench.open()
    with pytest.raises(BenchRefused, match=r"1e\+300 is beyond what can be told to a board"):
        run.bench.drive(1.0, 1e300)
    assert not any(isinstance(message, ms.Command) for message in run.board.heard)
    run.bench.lock()


@pytest.mark.parametrize("volts", [12.1, 5.7, 59.9, 0.3])
def test_a_board_takes_its_own_highest_voltage(volts: float) -> None:
    """12.1 in single precision is more than 12.1, were it rounded to the nearest."""
    assert struct.unpack("<f", struct.pack("<f", 12.1))[0] > 12.1
    facts = BoardFacts(max_voltage_v=volts)
    bench, _ = wired(lambda clock: make_bench(clock=clock, board=facts))
    assert bench.open().max_voltage_v == volts
    bench.enable()
    bench.drive(volts, 1000.0)
    with pytest.raises(BenchRefused):
        bench.drive(volts + 1e-3, 1000.0)
    bench.close()


# Rows that are none, and ends


def test_rows_that_differ_from_the_hello_are_damage() -> None:
    run = LongRun(0)
    run.bench.open()
    run.bench.read(0.01)
    good = RowFrame(1, 8000, PERIOD, 8, 0, 0, np.zeros((ROWS, 1), dtype=np.int32))
    for bad in (
        replace(good, period=PERIOD + 1),
        replace(good, raw=np.zeros((ROWS + 1, 1), dtype=np.int32)),
        replace(good, raw=np.zeros((ROWS // 2, 2), dtype=np.int32)),
    ):
        run.board.say(ms.Rows(bad.pack()))
    reading = run.bench.read(0.01)
    assert not reading.blocks and run.bench.damaged == 3
    assert [(one.kind, one.data) for one in reading.notices] == [("damaged_bytes", {"stretches": 3})]
    run.board.say(ms.Rows(replace(good, raw=good.raw[:5]).pack()))  # a short one is none
    assert len(run.bench.read(0.01).blocks[0]) == 5 and run.bench.damaged == 3


def test_messages_for_boards_that_come_from_one_are_damage() -> None:
    run = LongRun(0)
    run.bench.open()
    run.board.say(ms.Heartbeat(5), ms.AskHello(), ms.Command(3, ms.Code.ENABLE))
    run.bench.read(0.01)
    run.bench.read(0.01)
    assert run.bench.damaged == 3


def test_close_on_a_board_that_does_not_answer_ends_in_time() -> None:
    run = LongRun(0)
    run.bench.open()
    run.board.obey = lambda command: None
    begun_s = run.board.clock.now_s()
    run.bench.close()
    assert run.board.closed == 1
    assert run.board.clock.now_s() - begun_s < TRIES * ANSWER_S + 0.01
    assert [m.code for m in run.board.heard if isinstance(m, ms.Command)] == [ms.Code.CLOSE] * TRIES


def test_close_on_a_wire_that_is_gone_raises_nothing() -> None:
    run = LongRun(0)
    run.bench.open()
    run.board.gone = True
    run.bench.close()
    run.bench.close()
    assert run.board.closed == 1


def test_a_line_that_takes_no_more_is_a_timeout() -> None:
    run = LongRun(0)
    run.bench.open()

    def full(data: bytes) -> None:
        raise LinkTimeout("the line takes no more bytes")

    run.board.write = full  # type: ignore[method-assign]
    for command in (run.bench.enable, lambda: run.bench.halt(Halt.COAST), run.bench.lock):
        with pytest.raises(LinkError):
            command()
    run.bench.close()
