"""The board driver when the board restarts, loses its supply or is unplugged; on a virtual clock."""

from __future__ import annotations

import pytest
from bad_cable import Rig, change, lost
from conformance import Owner
from simulated_rigs import make_bench
from wired import wired

from drivers.board import BoardBench
from drivers.contract import Halt
from drivers.errors import BenchRefused, HardwareFault, LinkError, LinkTimeout
from drivers.link import messages as ms
from drivers.link.framing import wrap
from drivers.rows import RowBlock, Status


@pytest.fixture
def rig() -> Rig:
    return Rig()


# Restarts and power


def test_a_restart_in_the_middle_of_a_run_is_a_fault(rig: Rig) -> None:
    rig.spin()
    rig.end.reset()
    with pytest.raises(HardwareFault) as fault:
        rig.read(1.0)
    assert str(fault.value) == ("the board has restarted (reset): its drive stays off until it is armed anew")
    count = len(rig.carried)
    for command in (
        rig.bench.enable,
        lambda: rig.bench.drive(4.0, 8.0),
        rig.bench.lock,
        lambda: rig.bench.read(0.02),
    ):
        with pytest.raises(HardwareFault):
            command()
    assert len(rig.carried) == count  # nothing went out
    rig.bench.halt(Halt.COAST)  # whatever has happened
    assert rig.carried[count:] == ["halt"]
    rig.bench.close()
    again = Owner(rig.bench, rig.bench.open())
    again.run(0.2)
    assert not again.status & Status.ENABLED
    with pytest.raises(BenchRefused):
        rig.bench.drive(4.0, 8.0)
    assert int(again.blocks[0].tick[0]) < 1_000_000  # it counts from the beginning


def test_a_board_that_keeps_a_lock_over_its_latch_is_unlocked_before_it_is_armed(rig: Rig) -> None:
    """Not every board ends a lock with the drive; a host that armed such a one could not take the drive back."""
    rig.spin()
    board = rig.end._bench._board  # type: ignore[attr-defined]
    rig.bench.halt(Halt.COAST)
    rig.owner.run(0.1)
    arm = board.enable

    def arm_and_keep() -> None:
        locked = board.locked
        arm()
        board.locked = locked

    board.enable, board.locked = arm_and_keep, True
    rig.owner.run(0.1)
    assert rig.owner.status & Status.LOCKED
    rig.owner.run_until(lambda: rig.owner.allows(rig.bench.enable), 60.0)
    rig.bench.drive(2.0, 8.0)
    rig.owner.run(0.5)
    assert rig.owner.status & Status.ENABLED and not rig.owner.status & Status.LOCKED
    assert rig.carried.count("unlock") == 1


def test_rows_from_before_a_restart_are_handed_over_first(rig: Rig) -> None:
    rig.end.turn()
    rig.cable.clock.sleep_s(0.1)
    rig.end.turn()
    pending = rig.end.outgoing()
    rig.end.reset()  # what the line holds already still arrives
    rig.end._push(pending)
    reading = rig.bench.read(0.02)
    assert sum(map(len, reading.blocks)) == 100
    with pytest.raises(HardwareFault):
        rig.read(1.0)


def test_a_restart_that_nobody_heard_shows_in_its_counters(rig: Rig) -> None:
    rig.owner.run(5.0)
    rig.cable.meddle = change(ms.Boot, lost)
    rig.end.reset()
    rig.cable.clock.sleep_s(0.5)
    rig.end.turn()
    rig.end.take(wrap(ms.pack(ms.AskHello())))  # another program asks for rows
    with pytest.raises(HardwareFault, match="counts from the beginning again"):
        rig.read(1.0)
    with pytest.raises(HardwareFault):
        rig.bench.enable()


def test_a_restart_that_nobody_heard_and_then_silence(rig: Rig) -> None:
    rig.owner.run(5.0)
    rig.cable.meddle = change(ms.Boot, lost)
    rig.end.reset()
    readings = rig.read(0.9)
    assert not any(reading.blocks for reading in readings)
    with pytest.raises(HardwareFault, match="counts from the beginning again"):
        rig.read(2.0)  # the driver speaks up, the board begins to send again


def test_power_off_is_silence_and_power_on_leaves_the_drive_off(rig: Rig) -> None:
    rig.spin()
    beats = rig.end.counts["heartbeats"]
    rig.end.power_off()
    readings = rig.read(3.0)
    assert not any(reading.blocks or reading.notices for reading in readings)
    rig.bench.heartbeat()  # of an old row, into the void
    with pytest.raises(LinkTimeout):
        rig.bench.halt(Halt.COAST)
    assert rig.end.counts["heartbeats"] == beats
    rig.end.power_on()
    with pytest.raises(HardwareFault, match=r"restarted \(power\)"):
        rig.read(1.0)
    rig.bench.close()
    again = Owner(rig.bench, rig.bench.open())
    again.run(0.2)
    assert not again.status & Status.ENABLED
    with pytest.raises(BenchRefused):
        rig.bench.drive(4.0, 8.0)
    again.run_until(lambda: again.allows(rig.bench.enable), 20.0)
    again.run(0.1)
    assert again.status & Status.ENABLED
    rig.bench.close()


# The plug


def test_an_unplugged_line_is_an_error_and_close_raises_none(rig: Rig) -> None:
    rig.spin()
    rig.cable.plugged = False
    with pytest.raises(LinkError):
        rig.read(1.0)
    for command in (rig.bench.heartbeat, rig.bench.enable, lambda: rig.bench.halt(Halt.COAST)):
        with pytest.raises(LinkError):
            command()
    rig.bench.close()
    rig.bench.close()
    assert rig.cable.closed == 1
    with pytest.raises(LinkError):
        rig.bench.open()
    assert rig.cable.closed == 2
    rig.cable.plugged = True
    again = Owner(rig.bench, rig.bench.open())
    again.run(0.5, beat=False)
    assert again.status & Status.WATCHDOG  # nobody could tell it to stop
    rig.bench.close()


def test_rows_held_when_the_plug_is_pulled_are_handed_over_first(rig: Rig) -> None:
    rig.cable.meddle = change(ms.Answer, lost, 2)
    rig.bench.tap(1e-5)
    rig.cable.plugged = False
    assert len(rig.bench.read(0.02).blocks) >= 5
    with pytest.raises(LinkError):
        rig.bench.read(0.02)


def test_another_programs_first_halt_is_carried_out() -> None:
    """Its commands bear numbers the board has just answered to a program that died."""
    first, cable = wired(make_bench)
    first.open()
    first.enable()
    second = BoardBench(lambda: cable, cable.clock)
    second.open()
    second.halt(Halt.COAST)
    assert not enabled(second)


def enabled(bench: BoardBench) -> bool:
    blocks: list[RowBlock] = []
    while len(blocks) < 3:
        blocks += bench.read(0.05).blocks
    return bool(blocks[-1].status & Status.ENABLED)


def test_a_board_without_power_does_not_boot() -> None:
    bench, cable = wired(make_bench)
    bench.open()
    cable.end.reset()
    cable.end.power_off()
    cable.clock.sleep_s(1.0)
    cable.end.turn()
    assert cable.end.outgoing() == b"" and cable.end.pending == 0
