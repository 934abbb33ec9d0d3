"""The board driver on a bad line: lost, late, doubled and spoilt messages; on a virtual clock."""

from __future__ import annotations

import numpy as np
import pytest
from bad_cable import Meddle, Rig, change, damaged, late, lost, twice

from drivers.board import ANSWER_S, TRIES
from drivers.contract import Halt
from drivers.errors import BenchRefused, LinkTimeout
from drivers.link import messages as ms
from drivers.link.framing import wrap
from drivers.rows import Status


@pytest.fixture
def rig() -> Rig:
    return Rig()


# Commands


@pytest.mark.parametrize("times", range(TRIES))
def test_a_lost_answer_is_asked_for_again_and_the_command_carried_out_once(rig: Rig, times: int) -> None:
    begun_s = rig.cable.clock.now_s()
    rig.cable.meddle = change(ms.Answer, lost, times)
    tick = rig.bench.tap(1e-5)
    took_s = rig.cable.clock.now_s() - begun_s
    assert times * ANSWER_S <= took_s < (times + 1) * ANSWER_S
    assert rig.carried == ["tap"] and rig.end.counts["commands"] == 1
    # The tick is that of the tap, not that of the answer which came at last.
    assert abs(tick / 1e6 - begun_s) < 0.03


def test_no_answer_at_all_is_a_dead_link(rig: Rig) -> None:
    rig.cable.meddle = change(ms.Answer, lost)
    begun_s = rig.cable.clock.now_s()
    with pytest.raises(LinkTimeout, match="did not answer tap in time"):
        rig.bench.tap(1e-5)
    assert rig.cable.clock.now_s() - begun_s == pytest.approx(TRIES * ANSWER_S, abs=0.02)
    assert rig.carried == ["tap"]


def test_writes_to_a_locked_register_are_counted_once_each(rig: Rig) -> None:
    rig.spin()
    rig.bench.lock()
    for times in (1, 2, 0):
        rig.cable.meddle = change(ms.Answer, lost, times)
        with pytest.raises(BenchRefused, match="locked"):
            rig.bench.drive(5.0, 8.0)
    rig.cable.meddle = change(ms.Answer, lost, 1)
    assert rig.bench.unlock()[1] == 3
    assert rig.carried.count("unlock") == 1


@pytest.mark.parametrize("how", [lost, damaged])
def test_a_command_spoilt_on_the_way_is_said_again(rig: Rig, how: Meddle) -> None:
    rig.cable.meddle_out = change(ms.Command, how, TRIES - 1)
    rig.bench.tap(1e-5)
    assert rig.carried == ["tap"]


def test_two_equal_commands_are_two(rig: Rig) -> None:
    rig.bench.halt(Halt.COAST)
    rig.bench.halt(Halt.COAST)
    assert rig.carried == ["halt", "halt"]


@pytest.mark.parametrize("delay_s", [0.06, 0.15, 0.27, 0.34])
def test_late_answers_belong_to_their_own_command(rig: Rig, delay_s: float) -> None:
    rig.cable.meddle = late(rig.cable, ms.Answer, delay_s)
    ticks = [rig.bench.lock(), rig.bench.tap(1e-5)]
    with pytest.raises(BenchRefused, match="locked"):
        rig.bench.drive(4.0, 8.0)
    tick, writes = rig.bench.unlock()
    assert writes == 1
    assert rig.carried == ["lock", "tap", "drive", "unlock"]
    ticks.append(tick)
    assert np.all(np.diff(ticks) / 1e6 >= 0.9 * delay_s)
    rig.owner.run(0.2)
    assert not rig.owner.status & Status.LOCKED


def test_answers_that_come_twice_answer_once(rig: Rig) -> None:
    rig.cable.meddle = change(ms.Answer, twice)
    rig.bench.lock()
    for _ in range(20):
        with pytest.raises(BenchRefused):
            rig.bench.drive(4.0, 8.0)
        rig.bench.halt(Halt.COAST)
    assert rig.bench.unlock()[1] == 40
    assert len(rig.carried) == rig.end.counts["commands"] == 42


def test_answers_that_come_late_when_all_was_given_up_answer_nothing(rig: Rig) -> None:
    rig.cable.meddle = late(rig.cable, ms.Answer, 0.5)
    with pytest.raises(LinkTimeout):
        rig.bench.lock()
    with pytest.raises(LinkTimeout):  # the answers to `lock` come now
        rig.bench.unlock()
    assert rig.carried == ["lock", "unlock"]


def test_command_numbers_wrap(rig: Rig) -> None:
    rig.bench._number = 65_533
    for _ in range(6):
        rig.cable.meddle = change(ms.Answer, lost, 1)
        rig.bench.halt(Halt.COAST)
    assert rig.carried == ["halt"] * 6


# Rows


def test_rows_that_come_during_commands_come_out_of_the_next_read(rig: Rig) -> None:
    for _ in range(5):
        rig.cable.meddle = change(ms.Answer, lost, 2)
        rig.bench.tap(1e-5)
        reading = rig.bench.read(0.02)
        assert len(reading.blocks) >= 2 * ANSWER_S / 0.02 - 1
        assert len(reading.frames) == len(reading.blocks)
        rig.owner.blocks += reading.blocks
        rig.owner.run(0.05)
    ticks = np.concatenate([block.tick for block in rig.owner.blocks])
    assert np.all(np.diff(ticks.astype(np.int64)) == rig.owner.hello.row_period_ticks)
    assert np.all(np.diff([block.sequence for block in rig.owner.blocks]) == 1)
    assert all(block.lost_rows == 0 for block in rig.owner.blocks)


def test_damaged_frames_are_told_as_lost_rows_and_damaged_bytes(rig: Rig) -> None:
    rig.end.damage_frames(3)
    blocks = rig.owner.run(0.5)
    lost_rows = [
        (block.lost_rows, block.lost_frames) for block in blocks if block.lost_rows or block.lost_frames
    ]
    assert lost_rows == [(3 * rig.owner.hello.frame_rows, 3)]
    told = [one for one in rig.owner.notices if one.kind == "damaged_bytes"]
    assert sum(int(one.data["stretches"]) for one in told) == rig.bench.damaged >= 3
    first, last = rig.owner.blocks[0].tick[0], rig.owner.blocks[-1].tick[-1]
    assert all(first <= one.tick <= last for one in told)


def test_noise_is_told_and_harms_nothing(rig: Rig) -> None:
    for _ in range(10):
        rig.end.babble()
        rig.owner.run(0.1)
    assert rig.bench.damaged > 10
    ticks = np.concatenate([block.tick for block in rig.owner.blocks]).astype(np.int64)
    missing = (ticks[-1] - ticks[0]) // rig.owner.hello.row_period_ticks + 1 - len(ticks)
    assert missing == sum(block.lost_rows for block in rig.owner.blocks)


@pytest.mark.parametrize(("block", "every"), [(1 << 16, 3), (333, 5), (150, 9), (40, 29)])
def test_every_third_frame_or_so_is_lost_in_blocks_of_bytes(rig: Rig, block: int, every: int) -> None:
    count = 0

    def gaps(data: bytes) -> bytes:
        nonlocal count
        count += 1
        return b"" if count % every == 0 else data

    rig.spin()
    rig.cable.block, rig.cable.meddle = block, gaps
    before = len(rig.carried)
    asked = timeouts = 0
    for _ in range(30):
        rig.owner.run(0.1)
        asked += 1
        try:
            rig.bench.drive(4.0, 8.0)
        except LinkTimeout:
            timeouts += 1
    assert rig.carried[before:] == ["drive"] * asked and timeouts < 5
    rig.cable.meddle = lambda data: data
    rig.owner.run(0.2)
    ticks = np.concatenate([one.tick for one in rig.owner.blocks]).astype(np.int64)
    missing = (ticks[-1] - ticks[0]) // rig.owner.hello.row_period_ticks + 1 - len(ticks)
    assert missing == sum(one.lost_rows for one in rig.owner.blocks) > 600
    assert rig.owner.status & Status.ENABLED and not rig.owner.status & Status.LATCHED


# Heartbeats


def test_heartbeats_without_newer_rows_do_not_feed_the_watchdog(rig: Rig) -> None:
    """A host that hangs in a loop of heartbeats does not keep the motor on."""
    rig.spin()
    for _ in range(30):
        rig.bench.heartbeat()
        rig.cable.clock.sleep_s(0.02)
    rig.owner.run(0.1, beat=False)
    assert rig.owner.status & Status.LATCHED and rig.owner.status & Status.WATCHDOG


@pytest.mark.parametrize("ahead", [2**30, 2**31 - 1, 2**31, 2**32 - 1, 10_000_000])
def test_a_heartbeat_from_nowhere_does_not_block_later_ones(rig: Rig, ahead: int) -> None:
    rig.spin()
    newest = int(rig.owner.blocks[-1].tick[-1])
    rig.end.take(wrap(ms.pack(ms.Heartbeat(newest + ahead))))
    rig.owner.run(1.0)
    assert rig.owner.status & Status.ENABLED and not rig.owner.status & Status.LATCHED
    assert not any(one.kind == "latch" for one in rig.owner.notices)


def test_a_heartbeat_from_the_future_does_not_feed_the_watchdog(rig: Rig) -> None:
    rig.spin()
    newest = int(rig.owner.blocks[-1].tick[-1])
    for turn in range(30):
        rig.end.take(wrap(ms.pack(ms.Heartbeat(newest + 60_000_000 + turn))))
        rig.owner.run(0.02, beat=False)
    assert rig.owner.status & Status.WATCHDOG


def test_one_that_only_reads_is_not_forsaken(rig: Rig) -> None:
    blocks = rig.owner.run(8.0, beat=False)
    assert sum(len(block) for block in blocks) >= 8000
    assert not any(block.lost_rows for block in blocks)
