"""Faults on demand: what the host sees, and what the board does by itself."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest
from conformance import COMMANDS, Owner
from simulated_rigs import BOOM, COLUMN, make_bench

from drivers.clock import HostClock, VirtualClock
from drivers.contract import Halt
from drivers.errors import BenchRefused, LinkError, LinkTimeout
from drivers.rows import Status
from drivers.simulated.bench import SimulatedBench
from drivers.simulated.faults import Faults
from drivers.simulated.world import BoardFacts


def spinning(bench: SimulatedBench, volts: float = 8.0) -> Owner:
    owner = Owner(bench, bench.open())
    bench.enable()
    bench.drive(volts, 8.0)
    owner.run(volts / 8.0 + 1.0)
    owner.blocks.clear()
    return owner


def causes(owner: Owner) -> list[object]:
    return [notice.data["cause"] for notice in owner.notices if notice.kind == "latch"]


# Frames


def test_lost_frames_are_told_by_the_next_block() -> None:
    bench = make_bench()
    owner = Owner(bench, bench.open())
    owner.run(0.1)
    last = owner.blocks[-1]
    bench.faults.lose_frames(3)
    owner.run(0.1)
    lost = [block for block in owner.blocks if block.lost_frames]
    assert [block.lost_frames for block in lost] == [3]
    assert lost[0].lost_rows == 60
    assert int(lost[0].tick[0]) - int(last.tick[-1]) == 61_000


def test_a_damaged_frame_is_noticed_and_counts_as_lost() -> None:
    bench = make_bench()
    owner = Owner(bench, bench.open())
    owner.run(0.1)
    bench.faults.damage_frames(2)
    owner.run(0.2)
    damaged = [notice.data["sequence"] for notice in owner.notices if notice.kind == "damaged_frame"]
    assert len(damaged) == 2
    assert sum(block.lost_frames for block in owner.blocks) == 2
    received = {frame.sequence for frame in owner.frames}
    assert received.isdisjoint(damaged)
    assert received | set(damaged) == set(range(max(received) + 1))


def test_random_loss_has_its_probability_and_is_fully_told() -> None:
    bench = make_bench(lost_frame_probability=0.1, seed=4)
    owner = Owner(bench, bench.open())
    owner.run(20.0)
    lost = sum(block.lost_frames for block in owner.blocks)
    n = lost + len(owner.blocks)
    assert abs(lost / n - 0.1) < 4.0 * math.sqrt(0.1 * 0.9 / n)
    rows = sum(block.lost_rows + len(block) for block in owner.blocks)
    first, last = owner.blocks[0], owner.blocks[-1]
    assert rows - first.lost_rows == (int(last.tick[-1]) - int(first.tick[0])) // 1000 + 1


def test_a_silent_board_sends_nothing_and_obeys_still() -> None:
    clock = VirtualClock()
    bench = make_bench(clock=clock)
    owner = spinning(bench)
    bench.faults.fall_silent()
    before_s = clock.now_s()
    for _ in range(8):
        assert not bench.read(0.05).blocks
        bench.heartbeat()
    assert clock.now_s() == pytest.approx(before_s + 0.4, abs=0.021)
    bench.halt(Halt.COAST)
    bench.faults.speak_again()
    owner.run(0.2)
    assert 300 <= owner.blocks[0].lost_rows <= 420
    owner.run(0.1)
    assert not owner.status & Status.ENABLED


# Link


def test_a_pulled_line_fails_every_call_until_it_is_opened_anew() -> None:
    clock = VirtualClock()
    bench = make_bench(clock=clock)
    spinning(bench)
    bench.faults.unplug()
    for command in COMMANDS.values():
        with pytest.raises(LinkError):
            command(bench)
    clock.sleep_s(0.5)
    bench.faults.plug_in()
    with pytest.raises(LinkError):
        bench.read(0.1)
    bench.close()
    again = Owner(bench, bench.open())
    again.run(0.1)
    # Nobody has sent a heartbeat meanwhile.
    assert again.status & Status.WATCHDOG
    assert not again.status & Status.ENABLED


def test_a_line_that_is_out_cannot_be_opened() -> None:
    bench = make_bench()
    bench.faults.unplug()
    with pytest.raises(LinkError):
        bench.open()
    bench.faults.plug_in()
    bench.open()
    bench.faults.unplug()
    bench.close()
    bench.close()


def test_a_line_pulled_during_a_read_fails_that_read() -> None:
    bench = make_bench()
    bench.open()
    bench.faults.at(bench.tick + 50_000, Faults.unplug)
    with pytest.raises(LinkError):
        bench.read(0.2)


def test_a_hung_board_times_out() -> None:
    bench = make_bench()
    spinning(bench)
    bench.faults.hang()
    assert not bench.read(0.1).frames
    with pytest.raises(LinkTimeout) as caught:
        bench.heartbeat()
    assert isinstance(caught.value, TimeoutError)
    bench.read(0.2)
    bench.faults.wake()
    bench.heartbeat()
    with pytest.raises(BenchRefused):
        bench.drive(1.0, 1.0)  # the watchdog has cut meanwhile


# Contacts


@pytest.mark.parametrize(
    ("strike", "mend", "bit", "cause"),
    [
        (Faults.open_guard, Faults.close_guard, Status.GUARD_OPEN, "guard"),
        (Faults.press_stop, Faults.release_stop, Status.STOP_PRESSED, "stop"),
        (Faults.fail_bridge, Faults.mend_bridge, Status.BRIDGE_FAULT, "bridge"),
    ],
)
def test_contacts_take_the_power_and_keep_it(
    strike: Callable[[Faults], None], mend: Callable[[Faults], None], bit: Status, cause: str
) -> None:
    bench = make_bench()
    owner = spinning(bench, 4.0)
    tick = bench.tick
    bench.faults.at(tick + 100_000, strike)
    blocks = owner.run(0.3)
    cut = next(block for block in blocks if not block.status & Status.ENABLED)
    # Off within 20 ms, so the first frame that lies wholly behind the contact is without power.
    assert 100_000 <= int(cut.tick[0]) - tick <= 120_000 + 1000
    assert owner.status & bit and owner.status & Status.LATCHED
    assert causes(owner) == [cause]
    assert owner.notices[-1].tick == tick + 100_000
    for _ in range(80):
        owner.run(0.1)
    with pytest.raises(BenchRefused):
        bench.clear_latch()  # its cause persists
    with pytest.raises(BenchRefused):
        bench.enable()
    mend(bench.faults)
    with pytest.raises(BenchRefused):
        bench.enable()  # mending alone does not restart
    bench.clear_latch()
    bench.enable()


def test_an_open_guard_before_arming_only_forbids_arming() -> None:
    bench = make_bench()
    owner = Owner(bench, bench.open())
    bench.faults.open_guard()
    owner.run(0.1)
    assert owner.status & Status.GUARD_OPEN and not owner.status & Status.LATCHED
    with pytest.raises(BenchRefused, match="guard"):
        bench.enable()
    bench.faults.close_guard()
    bench.enable()


def test_low_supply_is_told() -> None:
    bench = make_bench()
    owner = spinning(bench)
    bench.faults.sag_supply()
    owner.run(0.1)
    assert owner.status & Status.UNDERVOLTAGE


# Mechanism


def test_a_jammed_crank_trips_the_board() -> None:
    bench = make_bench()
    owner = spinning(bench)
    tick = bench.tick
    bench.faults.stall_crank()
    blocks = owner.run(1.0)
    ticks, current = owner.values("motor current", blocks)
    window = (ticks > tick + 200_000) & (ticks < tick + 450_000)
    # Ohm's law at standstill: V / R with R = 1.3 ohm, warmed by at most 10 K.
    assert 8.0 / 1.36 < current[window].mean() < 8.0 / 1.29
    cut = next(block for block in blocks if block.status & Status.STALL)
    assert 450_000 < int(cut.tick[0]) - tick < 650_000
    assert causes(owner) == ["stall"]
    assert not owner.status & Status.ENABLED


def test_a_crank_that_never_starts_trips_too_but_not_below_the_threshold() -> None:
    bench = make_bench()
    bench.faults.stall_crank()
    owner = Owner(bench, bench.open())
    bench.enable()
    bench.drive(1.2, 8.0)
    owner.run(2.0)
    assert owner.status & Status.ENABLED
    bench.drive(2.0, 8.0)
    owner.run(1.0)
    assert causes(owner) == ["stall"]


def test_a_leak_across_the_terminals_shows_as_current() -> None:
    bench = make_bench()
    owner = spinning(bench)
    _, before = owner.values("motor current", owner.run(0.5))
    bench.faults.short_motor(2.0)
    _, after = owner.values("motor current", owner.run(0.5))
    assert after.mean() - before.mean() == pytest.approx(8.0 / 2.0, abs=0.1)
    bench.faults.short_motor(0.2)  # 40 A: beyond what the board lets pass
    owner.run(0.2)
    assert causes(owner) == ["current"]
    with pytest.raises(ValueError):
        bench.faults.short_motor(0.0)


def test_a_broken_link_lets_the_crank_spin_alone() -> None:
    bench = make_bench()
    owner = spinning(bench)
    _, height = owner.values("carriage height", owner.run(0.5))
    assert np.ptp(height) > 0.012  # shakes by about 8 mm
    bench.faults.break_link()
    owner.run(3.0)
    blocks = owner.run(1.0)
    _, height = owner.values("carriage height", blocks)
    _, crank = owner.values("crank angle", blocks)
    assert np.ptp(height) < 0.001
    # Without wings the motor runs up to V / (Ke N) but for friction.
    ideal_hz = 8.0 / (0.0066 * 6.0) / (2.0 * math.pi)
    flap_hz = (crank[-1] - crank[0]) / (2.0 * math.pi * (len(crank) - 1) * 1e-3)
    assert 0.95 * ideal_hz < flap_hz < ideal_hz


def test_without_stops_the_body_swings_beyond_them() -> None:
    bench = make_bench()
    owner = Owner(bench, bench.open())
    bench.faults.break_stops()
    owner.run(2.0)
    assert abs(bench.truth()["body_rad"]) > math.radians(60.0)


def test_a_binding_hinge_damps_ten_times_as_much() -> None:
    rises = []
    for binding in (False, True):
        bench = make_bench(tap_scatter=0.0, body_torque_noise_n_m_per_rt_hz=0.0)
        owner = Owner(bench, bench.open())
        owner.run(0.3)
        if binding:
            bench.faults.break_hinge()
        bench.tap(1.2e-4)
        _, body = owner.values("body angle", owner.run(0.5))
        rises.append(body.max() - BOOM.stop_low_rad)
    assert rises[1] < 0.85 * rises[0]


def test_an_encoder_slips_by_its_counts_and_the_index_tells() -> None:
    bench = make_bench()
    owner = spinning(bench, 4.0)
    assert [notice.kind for notice in owner.notices].count("index") == 1
    bench.faults.slip_encoder("crank", 16)
    bench.faults.slip_encoder("body", -40)
    block = owner.run(0.2)[-1]
    slips = [notice.data for notice in owner.notices if notice.kind == "index_slip"]
    assert slips == [{"channel": "crank", "counts": 16}]
    body = owner.hello.channels[0].values(block.raw[-1, 0])
    # run() may end a frame after the truth asked for here; the body moves little in that time
    assert body - bench.truth()["body_rad"] == pytest.approx(-40 * 2.0 * math.pi / 8192, abs=1e-3)
    with pytest.raises(ValueError):
        bench.faults.slip_encoder("load", 1)


def test_mending_makes_the_mechanism_whole_again() -> None:
    bench = make_bench()
    owner = spinning(bench, 5.0)
    bench.faults.stall_crank()
    owner.run(0.8)
    assert causes(owner) == ["stall"]
    bench.faults.mend()
    owner.run_until(lambda: owner.allows(bench.clear_latch), 20.0)
    bench.enable()
    bench.drive(5.0, 8.0)
    owner.run(1.5)
    assert bench.truth()["flap_hz"] > 10.0


# Halts against physics


def test_braking_stops_sooner_than_coasting() -> None:
    took = {}
    for how in (Halt.COAST, Halt.BRAKE):
        bench = make_bench(COLUMN)
        owner = spinning(bench, 8.0)
        bench.halt(how)
        seconds = 0.0
        while bench.truth()["flap_hz"] > 1.0:
            owner.run(0.1)
            seconds += 0.1
            assert seconds < 30.0
        took[how] = seconds
    assert took[Halt.BRAKE] < 0.5 * took[Halt.COAST]
    assert took[Halt.COAST] > 3.0


def test_the_boom_runs_at_the_reference_flap_rate() -> None:
    """25.87 Hz at 7.234 V, winding at 25 degC: computed once with an independent integrator (DOP853)."""
    bench = make_bench(body_torque_noise_n_m_per_rt_hz=0.0)
    owner = Owner(bench, bench.open())
    bench.enable()
    bench.drive(7.6, 4.0)
    owner.run(4.0)
    _, crank = owner.values("crank angle", owner.run(2.0))
    flap_hz = (crank[-1] - crank[0]) / (2.0 * math.pi * (len(crank) - 1) * 1e-3)
    # By then the speed grows with the voltage by about 3.6 Hz/V.
    assert flap_hz == pytest.approx(25.87 + 3.6 * (7.6 - 7.234), rel=0.02)


# Real pace


def test_on_the_hosts_clock_a_second_takes_no_less() -> None:
    clock = HostClock()
    bench = make_bench(clock=clock, board=BoardFacts(frame_rows=10))
    bench.open()
    begun_s = clock.now_s()
    rows = 0
    while clock.now_s() - begun_s < 0.2:
        rows += sum(len(block) for block in bench.read(0.02).blocks)
    took_s = clock.now_s() - begun_s
    assert 0.2 - 0.021 <= rows * 1e-3 <= took_s + 1e-3 + 0.01
    bench.close()
