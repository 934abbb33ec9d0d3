"""Time on the simulated bench: same seed and commands, same bytes; ticks that wrap; clocks that drift."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from conformance import Owner
from simulated_rigs import make_bench

from analysis.mechanism import equations
from drivers.clock import VirtualClock
from drivers.contract import Halt
from drivers.simulated.bench import SimulatedBench
from drivers.simulated.noise import NormalRows, stream
from drivers.simulated.readout import read_out
from drivers.simulated.world import BoardFacts


def played(bench: SimulatedBench, clock: VirtualClock, waits: list[float], sleep: bool) -> list[bytes]:
    """Frames of one fixed play of commands, its time cut up by `waits` in turn."""
    frames: list[bytes] = []
    pattern = itertools.cycle(waits)
    start_s = clock.now_s()

    def wait_until(time_s: float) -> None:
        while (left_s := start_s + time_s - clock.now_s()) > 1e-9:
            part = min(next(pattern), left_s)
            if sleep:
                clock.sleep_s(part)
            else:
                before = clock.now_s()
                frames.extend(frame.pack() for frame in bench.read(part).frames)
                # A read may end at the last whole frame before its wait is over.
                clock.sleep_s(before + part - clock.now_s())

    bench.open()
    bench.enable()
    bench.drive(9.0, 4.0)
    for beat in range(1, 31):
        wait_until(0.1 * beat)
        bench.heartbeat()
        if beat in (22, 26):
            bench.tap(1e-4)
        if beat == 24:
            bench.lock()
    wait_until(3.013)
    bench.halt(Halt.BRAKE)
    wait_until(3.5)
    frames.extend(frame.pack() for frame in bench.read(0.0).frames)
    bench.close()
    return frames


@pytest.mark.parametrize(
    ("waits", "sleep"),
    [([0.1], False), ([0.137, 0.003, 0.05], False), ([0.001], False), ([0.033], True)],
    ids=["100 ms", "mixed", "1 ms", "slept"],
)
def test_bytes_do_not_depend_on_how_the_reading_is_cut_up(waits: list[float], sleep: bool) -> None:
    world = {"lost_frame_probability": 0.05, "load_drift_n_per_rt_s": 0.01, "seed": 5}
    clocks = VirtualClock(), VirtualClock(100.0)
    plain = played(make_bench(clock=clocks[0], **world), clocks[0], [0.02], False)
    other = played(make_bench(clock=clocks[1], **world), clocks[1], waits, sleep)
    assert 140 < len(plain) < 175  # 3.5 s in frames of 20 ms, some lost
    assert plain == other


def test_nothing_is_compiled_once_the_bench_is_built() -> None:
    clock = VirtualClock()
    bench = make_bench(clock=clock)
    kernels = (read_out, equations.advance)
    before = [len(kernel.signatures) for kernel in kernels]
    assert all(before)
    played(bench, clock, [0.137, 0.003, 0.05], False)
    assert [len(kernel.signatures) for kernel in kernels] == before


def test_another_seed_gives_other_bytes() -> None:
    clocks = VirtualClock(), VirtualClock()
    one = played(make_bench(clock=clocks[0], seed=1), clocks[0], [0.02], False)
    two = played(make_bench(clock=clocks[1], seed=2), clocks[1], [0.02], False)
    assert one != two


def test_a_read_waits_no_longer_than_it_may() -> None:
    clock = VirtualClock()
    bench = make_bench(clock=clock)
    bench.open()
    assert not bench.read(0.0).frames and clock.now_s() == 0.0
    assert not bench.read(0.015).frames
    assert clock.now_s() == pytest.approx(0.015)
    # The frame of 20 ms is complete 5 ms later, and the read returns then.
    assert len(bench.read(0.019).frames) == 1
    assert clock.now_s() == pytest.approx(0.020)
    assert len(bench.read(0.1).frames) == 5
    # Rows that came while the host was elsewhere are there at once.
    clock.sleep_s(0.06)
    assert len(bench.read(0.0).frames) == 3
    assert clock.now_s() == pytest.approx(0.180)


def test_ticks_go_on_across_their_wrap_and_a_reopening() -> None:
    clock = VirtualClock()
    bench = make_bench(clock=clock, board=BoardFacts(boot_tick=2**32 - 50_000))
    owner = Owner(bench, bench.open())
    owner.run(0.2)
    ticks = np.concatenate([block.tick for block in owner.blocks]).astype(np.int64)
    assert np.all(np.diff(ticks) == 1000) and ticks[-1] > 2**32
    assert owner.frames[-1].tick < 2**31  # on the wire it has wrapped
    assert bench.enable() == ticks[-1]
    bench.close()
    again = Owner(bench, bench.open())
    rows = sum(map(len, again.run(0.1)))
    # A host that connects now cannot know that the tick has wrapped.
    assert int(again.blocks[-1].tick[-1]) == bench.tick == ticks[-1] + 1000 * rows - 2**32


def test_a_fast_board_clock_counts_more_rows_than_true_time() -> None:
    clock = VirtualClock()
    bench = make_bench(clock=clock, clock_error_ppm=2000.0)
    bench.open()
    rows = 0
    while clock.now_s() < 10.0 - 1e-6:
        rows += sum(len(block) for block in bench.read(10.0 - clock.now_s()).blocks)
    assert rows == 10_020


def test_normal_numbers_do_not_depend_on_the_size_of_a_draw() -> None:
    whole = NormalRows(stream(3, 0), 4, chunk=64).take(500)
    pieces = NormalRows(stream(3, 0), 4, chunk=64)
    sizes = [1, 63, 64, 65, 200, 7, 100]
    cut = np.concatenate([pieces.take(size).copy() for size in sizes])
    assert np.array_equal(cut, whole)
    assert abs(whole.mean()) < 4.0 / np.sqrt(whole.size)
    assert abs(whole.std() - 1.0) < 4.0 / np.sqrt(2.0 * whole.size)


@pytest.mark.parametrize(("row_hz", "frame_rows"), [(3000.0, 20), (1000.0, 0), (1000.0, 256)])
def test_a_board_that_cannot_keep_its_time_is_refused(row_hz: float, frame_rows: int) -> None:
    with pytest.raises(ValueError):
        BoardFacts(row_hz=row_hz, frame_rows=frame_rows)
