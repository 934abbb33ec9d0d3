"""What every bench must do, written once: inherit `BenchConformance` and override its fixtures.

    class TestMyBench(BenchConformance):
        @pytest.fixture
        def bench(self) -> Bench: ...      # closed, at standstill, free to be driven

The tests need `spin_v`, a drive at which the crank surely turns, `coast_s`, in which it surely stops from
there, and a tap that the resting body shows. What a bench does not have is skipped by its capabilities.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np
import pytest
from lock_conformance import LockConformance

from drivers.channels import MEASURED_UNITS
from drivers.contract import Bench, Halt, Hello, Notice
from drivers.errors import BenchMisuse, BenchRefused
from drivers.rows import FrameSequence, RowBlock, RowFrame, Status

COMMANDS: dict[str, Callable[[Bench], object]] = {
    "read": lambda bench: bench.read(0.0),
    "heartbeat": lambda bench: bench.heartbeat(),
    "enable": lambda bench: bench.enable(),
    "drive": lambda bench: bench.drive(1.0, 1.0),
    "halt": lambda bench: bench.halt(Halt.COAST),
    "lock": lambda bench: bench.lock(),
    "unlock": lambda bench: bench.unlock(),
    "tap": lambda bench: bench.tap(1e-5),
    "sync": lambda bench: bench.sync(),
    "release": lambda bench: bench.release(0.0),
    "clear_latch": lambda bench: bench.clear_latch(),
}


class Owner:
    """The one owner of a bench under test: reads with heartbeats and keeps all that came."""

    def __init__(self, bench: Bench, hello: Hello) -> None:
        self.bench = bench
        self.hello = hello
        self.frames: list[RowFrame] = []
        self.blocks: list[RowBlock] = []
        self.notices: list[Notice] = []

    def run(self, duration_s: float, *, beat: bool = True) -> list[RowBlock]:
        """Read until `duration_s` of board time has come; the blocks that came."""
        rows = round(duration_s * self.hello.tick_hz / self.hello.row_period_ticks)
        came: list[RowBlock] = []
        misses = 0
        while rows > 0:
            reading = self.bench.read(0.05)
            if beat:
                self.bench.heartbeat()
            self.frames += reading.frames
            self.notices += reading.notices
            came += reading.blocks
            rows -= sum(len(block) + block.lost_rows for block in reading.blocks)
            misses = 0 if reading.blocks else misses + 1
            assert misses < 100, "no rows came"
        self.blocks += came
        return came

    def run_until(self, done: Callable[[], bool], at_most_s: float) -> None:
        for _ in range(round(at_most_s / 0.1)):
            if done():
                return
            self.run(0.1)
        raise AssertionError(f"not within {at_most_s:g} s")

    def allows(self, command: Callable[[], object]) -> bool:
        try:
            command()
        except BenchRefused:
            return False
        return True

    @property
    def status(self) -> Status:
        return Status(self.blocks[-1].status)

    def values(self, measures: str, blocks: list[RowBlock]) -> tuple[np.ndarray, np.ndarray]:
        """Ticks (int64) and SI values of a channel."""
        column = self.hello.channels.measuring(measures)
        if column is None:
            pytest.skip(f"the bench does not measure {measures}")
        ticks = np.concatenate([block.tick for block in blocks]).astype(np.int64)
        raw = np.concatenate([block.raw[:, column] for block in blocks])
        return ticks, self.hello.channels[column].values(raw)


class BenchConformance(LockConformance):
    """The driver contract as tests."""

    spin_v = 4.0
    slew_v_per_s = 8.0
    coast_s = 20.0
    tap_n_m_s = 1e-4  # lifts the resting body visibly

    @pytest.fixture
    def bench(self) -> Bench:
        pytest.fail("override this fixture with the bench under test")

    @pytest.fixture
    def owner(self, bench: Bench) -> Iterator[Owner]:
        owner = Owner(bench, bench.open())
        yield owner
        bench.close()

    def spin(self, owner: Owner) -> None:
        owner.bench.enable()
        owner.bench.drive(self.spin_v, self.slew_v_per_s)
        owner.run(self.spin_v / self.slew_v_per_s + 0.5)

    # Lifecycle

    def test_hello_describes_rows_and_channels(self, owner: Owner) -> None:
        hello = owner.hello
        assert hello.name and hello.firmware
        assert hello.tick_hz > 0 and hello.row_period_ticks > 0 and 1 <= hello.frame_rows <= 255
        names = [channel.name for channel in hello.channels]
        assert len(set(names)) == len(names) > 0
        for channel in hello.channels:
            assert MEASURED_UNITS[channel.measures] == channel.unit
            assert channel.scale != 0.0 and channel.low_raw < channel.high_raw
        assert 0.0 < hello.heartbeat_timeout_s <= 0.2
        assert 0.0 < hello.max_voltage_v <= 60.0

    @pytest.mark.parametrize("name", COMMANDS)
    def test_nothing_works_before_open_or_after_close(self, bench: Bench, name: str) -> None:
        with pytest.raises(BenchMisuse):
            COMMANDS[name](bench)
        bench.open()
        bench.close()
        with pytest.raises(BenchMisuse):
            COMMANDS[name](bench)

    def test_a_second_open_is_a_mistake(self, owner: Owner) -> None:
        with pytest.raises(BenchMisuse):
            owner.bench.open()

    def test_close_may_come_at_any_time_and_again(self, bench: Bench) -> None:
        bench.close()
        bench.open()
        bench.close()
        bench.close()
        hello = bench.open()
        assert Owner(bench, hello).run(0.1)
        bench.close()

    def test_close_takes_the_drive_away(self, bench: Bench) -> None:
        owner = Owner(bench, bench.open())
        self.spin(owner)
        bench.close()
        again = Owner(bench, bench.open())
        again.run(0.2)
        assert not again.status & (Status.ENABLED | Status.LOCKED)
        with pytest.raises(BenchRefused):
            bench.drive(1.0, 1.0)
        bench.close()

    # Rows

    def test_rows_follow_one_another_without_a_gap(self, owner: Owner) -> None:
        blocks = owner.run(1.0)
        ticks = np.concatenate([block.tick for block in blocks])
        assert ticks.dtype == np.uint64
        assert np.all(np.diff(ticks) == owner.hello.row_period_ticks)
        assert np.all(np.diff([block.sequence for block in blocks]) == 1)
        for block in blocks:
            assert block.raw.dtype == np.int32
            assert block.raw.shape == (len(block), len(owner.hello.channels))
            assert block.lost_rows == block.lost_frames == 0

    def test_blocks_are_the_frames_placed_in_time(self, owner: Owner) -> None:
        owner.run(0.5)
        sequence = FrameSequence()
        placed = [sequence.place(RowFrame.unpack(frame.pack())) for frame in owner.frames]
        assert len(placed) == len(owner.blocks)
        for one, other in zip(placed, owner.blocks, strict=True):
            assert np.array_equal(one.tick, other.tick) and np.array_equal(one.raw, other.raw)
            assert (one.sequence, one.status) == (other.sequence, other.status)

    def test_what_was_read_stays_as_it_was(self, owner: Owner) -> None:
        block = owner.run(0.1)[0]
        kept = block.raw.copy()
        owner.run(0.3)
        assert np.array_equal(block.raw, kept)

    # Drive

    def test_acknowledgements_name_ticks_among_the_rows(self, owner: Owner) -> None:
        owner.run(0.1)
        before = int(owner.blocks[-1].tick[-1])
        ticks = [owner.bench.enable(), owner.bench.drive(0.5, 10.0), owner.bench.halt(Halt.COAST)]
        owner.run(0.1)
        after = int(owner.blocks[-1].tick[-1])
        assert ticks == sorted(ticks)
        assert before <= ticks[0] and ticks[-1] <= after

    def test_the_board_ramps_from_the_acknowledged_tick(self, owner: Owner) -> None:
        owner.bench.enable()
        tick = owner.bench.drive(2.0, 4.0)
        blocks = owner.run(0.8)
        ticks, volts = owner.values("motor voltage", blocks)
        after_s = (ticks - tick) / owner.hello.tick_hz
        wanted = np.clip(4.0 * after_s, 0.0, 2.0)
        assert np.abs(volts - wanted).max() < 0.15
        begun = next(block for block in blocks if int(block.tick[0]) > tick)  # a wire brings older rows first
        assert Status(begun.status) & Status.RAMPING
        assert not owner.status & Status.RAMPING
        assert owner.status & Status.ENABLED

    def test_no_drive_without_power_stage(self, owner: Owner) -> None:
        with pytest.raises(BenchRefused):
            owner.bench.drive(1.0, 1.0)

    @pytest.mark.parametrize(
        ("volts", "slew"),
        [(-0.5, 1.0), (61.0, 1.0), (float("nan"), 1.0), (1.0, 0.0), (1.0, -1.0), (1.0, float("nan"))],
    )
    def test_a_drive_out_of_range_is_refused(self, owner: Owner, volts: float, slew: float) -> None:
        owner.bench.enable()
        with pytest.raises(BenchRefused):
            owner.bench.drive(volts, slew)

    def test_enabling_twice_changes_nothing(self, owner: Owner) -> None:
        self.spin(owner)
        owner.bench.enable()
        _, volts = owner.values("motor voltage", owner.run(0.2))
        assert abs(volts.mean() - self.spin_v) < 0.2

    # Halts

    @pytest.mark.parametrize("how", list(Halt))
    def test_a_halt_is_accepted_in_every_state(self, owner: Owner, how: Halt) -> None:
        owner.bench.halt(how)  # off
        self.spin(owner)
        owner.bench.lock()
        owner.bench.halt(how, self.slew_v_per_s)  # powered and locked
        owner.run(self.spin_v / self.slew_v_per_s + 0.2)
        assert not owner.status & Status.ENABLED
        owner.bench.unlock()
        owner.bench.halt(how)  # off again

    def test_off_does_not_mean_stopped(self, owner: Owner) -> None:
        self.spin(owner)
        owner.bench.halt(Halt.COAST)
        owner.run(0.1)
        _, crank = owner.values("crank angle", owner.run(0.1))
        assert abs(crank[-1] - crank[0]) > 0.1
        with pytest.raises(BenchRefused):
            owner.bench.enable()
        owner.run_until(lambda: owner.allows(owner.bench.enable), self.coast_s)
        _, crank = owner.values("crank angle", owner.run(0.2))
        assert abs(crank[-1] - crank[0]) < 0.1 * 2.0 * np.pi

    def test_a_ramped_halt_falls_at_its_slew_then_coasts(self, owner: Owner) -> None:
        self.spin(owner)
        tick = owner.bench.halt(Halt.RAMP, self.slew_v_per_s)
        fall_s = self.spin_v / self.slew_v_per_s
        ticks, volts = owner.values("motor voltage", owner.run(0.8 * fall_s))
        after_s = (ticks - tick) / owner.hello.tick_hz
        assert np.abs(volts - (self.spin_v - self.slew_v_per_s * after_s)).max() < 0.2
        with pytest.raises(BenchRefused):
            owner.bench.drive(self.spin_v, self.slew_v_per_s)
        owner.run(0.3 * fall_s + 0.1)
        assert not owner.status & Status.ENABLED

    # Watchdog and latch

    def test_the_board_cuts_the_drive_when_the_heartbeat_stops(self, owner: Owner) -> None:
        self.spin(owner)
        owner.bench.heartbeat()
        last = int(owner.blocks[-1].tick[-1])
        blocks = owner.run(0.5, beat=False)
        cut = next(block for block in blocks if block.status & Status.WATCHDOG)
        assert cut.status & Status.LATCHED
        waited_s = (int(cut.tick[0]) - last) / owner.hello.tick_hz
        frame_s = len(cut) * owner.hello.row_period_ticks / owner.hello.tick_hz
        timeout_s = owner.hello.heartbeat_timeout_s
        assert timeout_s - frame_s <= waited_s <= timeout_s + 2.0 * frame_s + 0.02
        assert not owner.status & Status.ENABLED
        assert [n.data["cause"] for n in owner.notices if n.kind == "latch"] == ["watchdog"]

    def test_heartbeats_keep_the_drive_on(self, owner: Owner) -> None:
        self.spin(owner)
        owner.run(3.0 * owner.hello.heartbeat_timeout_s)
        assert owner.status & Status.ENABLED and not owner.status & Status.LATCHED

    def test_without_drive_no_heartbeat_is_needed(self, owner: Owner) -> None:
        owner.run(3.0 * owner.hello.heartbeat_timeout_s, beat=False)
        assert not owner.status & Status.LATCHED

    def test_a_latch_needs_standstill_and_a_fresh_arm(self, owner: Owner) -> None:
        self.spin(owner)
        owner.run(2.0 * owner.hello.heartbeat_timeout_s, beat=False)
        assert owner.status & Status.LATCHED
        for command in (
            lambda: owner.bench.drive(1.0, 1.0),
            owner.bench.enable,
            owner.bench.clear_latch,  # it still turns
        ):
            with pytest.raises(BenchRefused):
                command()
        owner.run_until(lambda: owner.allows(owner.bench.clear_latch), self.coast_s)
        owner.run(0.1)
        assert not owner.status & (Status.LATCHED | Status.ENABLED)
        with pytest.raises(BenchRefused):
            owner.bench.drive(1.0, 1.0)
        owner.bench.enable()
        owner.bench.drive(1.0, 1.0)

    # Tapper, sync line, releaser

    def test_a_tap_acts_from_its_tick(self, owner: Owner) -> None:
        if not owner.hello.capabilities.tapper:
            with pytest.raises(BenchMisuse):
                owner.bench.tap(self.tap_n_m_s)
            return
        quiet_ticks, quiet = owner.values("body angle", owner.run(0.5))
        tick = owner.bench.tap(self.tap_n_m_s)
        assert tick >= quiet_ticks[-1]
        ticks, angle = owner.values("body angle", owner.run(0.5))
        before = angle[ticks <= tick]
        assert np.ptp(np.concatenate([quiet, before])) < 0.2 * (angle.max() - quiet.mean())
        assert angle.max() > quiet.mean() + 0.01

    @pytest.mark.parametrize("impulse", [0.0, float("nan"), float("inf")])
    def test_an_impossible_tap_is_refused(self, owner: Owner, impulse: float) -> None:
        if not owner.hello.capabilities.tapper:
            pytest.skip("no tapper")
        with pytest.raises(BenchRefused):
            owner.bench.tap(impulse)

    def test_a_sync_pulse_has_a_tick(self, owner: Owner) -> None:
        owner.run(0.1)
        if not owner.hello.capabilities.sync:
            with pytest.raises(BenchMisuse):
                owner.bench.sync()
            return
        tick = owner.bench.sync()
        assert tick >= int(owner.blocks[-1].tick[-1])

    def test_the_body_starts_from_rest_where_it_is_released(self, owner: Owner) -> None:
        if not owner.hello.capabilities.release:
            with pytest.raises(BenchMisuse):
                owner.bench.release(0.1)
            return
        angle_rad = 0.1
        tick = owner.bench.release(angle_rad)
        wait_s = (tick - int(owner.run(0.1)[-1].tick[-1])) / owner.hello.tick_hz
        ticks, angle = owner.values("body angle", owner.run(max(wait_s, 0.0) + 0.1))
        held = angle[(ticks > tick - 0.02 * owner.hello.tick_hz) & (ticks <= tick)]
        assert len(held) and np.abs(held - angle_rad).max() < 0.005
