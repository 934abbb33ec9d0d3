"""Interlocks: each limit, on the simulated boom with a fault, through the whole loop."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from running import Book, boom, go
from scipy.integrate import solve_ivp

from drivers.contract import Halt
from drivers.rows import RowBlock, Status
from drivers.simulated.bench import SimulatedBench
from rig.bench_source import channel_table
from rig.description import DEFAULT_HALTS, MotorDescription
from rig.files.rig import read_rig
from rig.run.cautions import CAUTIONS, Acknowledgement
from rig.run.figures import apart
from rig.run.interlocks import Interlocks
from rig.run.turning import TurnCounter
from rig.run.winding import WindingModel
from rig.shipped import find
from rig.steps import Hold, Ramp

SPIN = [Ramp(to_v=6.0, slew_v_per_s=2.0), Hold(for_s=8.0)]
AT = 5_000_000  # ticks since boot


def at(act: Callable[[SimulatedBench], None]) -> Callable[[SimulatedBench], None]:
    return lambda bench: bench.faults.at(AT, lambda _: act(bench))


CASES = {
    "current": (boom(slew_v_per_s=3.0, current_a=0.3), None, "Motor current"),
    "voltage": (boom(slew_v_per_s=3.0, voltage_v=5.5), None, "Motor voltage"),
    "winding": (boom(slew_v_per_s=3.0, winding_deg_c=25.3), None, "Winding temperature"),
    "flap_rate": (boom(slew_v_per_s=3.0, flap_hz=15.0), None, "Flap rate"),
    "load": (boom(slew_v_per_s=3.0, load_n=3.5), None, "Vertical load"),
    "travel": (boom(slew_v_per_s=3.0), at(lambda bench: bench.faults.break_stops()), "Body angle"),
    # A stalled crank is first seen by the board itself, which has the same limit.
    "board (stall)": (boom(slew_v_per_s=3.0, stall_s=0.2), at(lambda b: b.faults.stall_crank()), "(stall)"),
    "loss": (boom(slew_v_per_s=3.0), at(lambda bench: bench.faults.lose_frames(8)), "were lost"),
    "board": (boom(slew_v_per_s=3.0), at(lambda bench: bench.faults.press_stop()), "switched the drive off by itself"),
}  # fmt: skip


@pytest.mark.parametrize("cause", CASES)
def test_trip(cause: str) -> None:
    rig, prepare, words = CASES[cause]
    cause = cause.split()[0]
    run = go(SPIN, rig, prepare=prepare)
    assert run.outcome.exit_code == 3
    causes = [trip.cause for trip in run.outcome.trips]
    assert cause in causes, causes
    assert len(causes) == len(set(causes))  # latched: told once
    trip = next(trip for trip in run.outcome.trips if trip.cause == cause)
    assert words.lower() in trip.sentence.lower()
    assert trip.sentence.endswith(("before arming again.", "arm again."))
    assert re.match(r"At \d+\.\d{3} s, [a-z0-9]", trip.sentence), trip.sentence
    assert trip.halt is DEFAULT_HALTS[cause]
    kinds = run.book.kinds()
    assert kinds.index("trip") < kinds.index("halt") < kinds.index("finished")
    assert run.bench.truth()["register_v"] == 0.0
    assert run.bench.truth()["flap_hz"] < 0.5  # the shuttle may still rock the crank a little


def test_disk_reserve() -> None:
    run = go(SPIN, book=Book(free_bytes=1000))
    assert run.outcome.exit_code == 3
    assert re.match(r"At \d+\.\d{3} s, 0 MB of disk were left \(reserve \d+ MB\);", run.outcome.reason)


def test_a_failing_journal_takes_the_drive_away() -> None:
    run = go(SPIN, book=Book(fail_after=200))
    assert run.outcome.exit_code == 3
    assert "disk is full" in run.outcome.reason
    run.bench.read(0.1)
    assert run.bench.truth()["register_v"] == 0.0


def test_silence_is_stale_data() -> None:
    run = go(SPIN, prepare=at(lambda bench: bench.faults.fall_silent()))
    assert run.outcome.exit_code == 4
    # The time of the newest row, and in a clause of its own: it is no part of the limit.
    words = r"After \d+\.\d{3} s, no rows came from the bench for (\d+) ms \(limit (\d+) ms\);"
    told = re.match(words, run.outcome.reason)
    assert told is not None and int(told[1]) > int(told[2]) == 200, run.outcome.reason


@pytest.mark.parametrize(
    ("value", "limit", "digits", "told"),
    [
        (1.2, 1.0, 1, ("1.2", "1.0")),
        (1.0004, 1.0, 1, ("1.0004", "1.0000")),
        (200.2, 200.0, 0, ("200.2", "200.0")),
        (-61.0001, -61.0, 2, ("-61.0001", "-61.0000")),
        (2.0, 2.0, 1, ("2.0", "2.0")),
        (1.0 + 1e-15, 1.0, 1, ("1.000000000", "1.000000000")),
    ],
)
def test_a_value_and_its_limit_read_differently_if_they_differ(
    value: float, limit: float, digits: int, told: tuple[str, str]
) -> None:
    assert apart(value, limit, digits) == told


def test_lost_rows_are_told_of_the_span_they_were_lost_in() -> None:
    """Barely above the limit of 1 %, in a run younger than the window: neither "1.0 % of 1.0 %" nor "10 s"."""
    rig = boom()
    table = channel_table(rig)
    interlocks = Interlocks(rig, table, 1_000_000)
    raw = np.zeros((20, len(table)), dtype=np.int32)
    trips, at = [], 0
    for k in range(100):
        lost = 21 if k == 99 else 0
        at += lost
        tick = (np.arange(at, at + 20, dtype=np.uint64) + np.uint64(1)) * np.uint64(1000)
        at += 20
        trips += interlocks.check(RowBlock(tick=tick, raw=raw, lost_rows=lost))
    (trip,) = trips
    assert trip.cause == "loss"
    assert "1.04 % of the rows of the last 2.0 s were lost (limit 1.00 %)" in trip.sentence


def test_a_pulled_cable() -> None:
    run = go(SPIN, prepare=at(lambda bench: bench.faults.unplug()))
    assert run.outcome.exit_code == 4
    assert "cable" in run.outcome.reason
    assert run.book.kinds()[-1] == "finished"


def test_halts_of_a_rig_are_obeyed() -> None:
    rig = boom(slew_v_per_s=3.0, flap_hz=15.0)
    for how in (Halt.RAMP, Halt.BRAKE, Halt.COAST):
        run = go(SPIN, replace(rig, halts={**DEFAULT_HALTS, "flap_rate": how}))
        assert run.book.of("halt")[0].data["how"] == how.value


def test_losses_are_written_down() -> None:
    run = go(SPIN, prepare=at(lambda bench: bench.faults.lose_frames(2)))
    assert run.outcome.exit_code == 0
    assert run.book.lost == [(40, 2, 0)]
    assert run.book.of("loss")[0].data == {"rows": 40, "frames": 2, "overruns": 0}


def test_winding_against_an_integrator() -> None:
    """scipy's solve_ivp on the two-body equations; handbook: copper 0.00393 per K at 20 degC (IEC 60028)."""
    motor = MotorDescription(1.3, 4.0, 45.0, 6.0, 14.0)
    model = WindingModel(motor, 110.0, 25.0)
    assert pytest.approx((1.0 + 0.00393 * 70.0) / (1.0 + 0.00393 * 5.0), rel=1e-3) == 1.0 + 0.003854 * (
        90.0 - 25.0
    )
    square = 4.0

    def right(_: float, x: np.ndarray) -> list[float]:
        flow = (x[0] - x[1]) / 6.0
        heat = square * 1.3 * (1.0 + 0.003854 * (x[0] - 25.0))
        return [(heat - flow) / 4.0, (flow - (x[1] - 25.0) / 14.0) / 45.0]

    for _ in range(10_000):
        model.add(square, 0.02)
    truth = solve_ivp(right, (0.0, 200.0), [25.0, 25.0], rtol=1e-9).y[:, -1]
    assert model.winding_deg_c == pytest.approx(truth[0], abs=0.05)
    assert WindingModel(motor, 110.0).winding_deg_c > 60.0  # unknown history: hot


def test_the_host_sees_a_stall_too() -> None:
    """Rows of a board that has no stall trip of its own: 6 V, no turn, for longer than the limit."""
    rig = boom(stall_s=0.5)
    table = channel_table(rig)
    interlocks = Interlocks(rig, table, 1_000_000)
    raw = np.zeros((20, len(table)), dtype=np.int32)
    volts = table.measuring("motor voltage")
    assert volts is not None
    raw[:, volts] = round(table[volts].raw(6.0))
    trips = []
    for k in range(100):
        tick = np.arange(20 * k, 20 * k + 20, dtype=np.uint64) * np.uint64(1000)
        trips += interlocks.check(RowBlock(tick=tick, raw=raw, status=Status.ENABLED))
    assert [trip.cause for trip in trips] == ["stall"]
    assert "crank has not turned for 0.5" in trips[0].sentence
    assert {margin.cause for margin in interlocks.margins()} >= {
        "current",
        "voltage",
        "winding",
        "travel",
        "loss",
    }


def test_turn_counter_sees_through_one_wrong_count() -> None:
    counter = TurnCounter(2048, 1_000_000)
    for k in range(100):
        counts = round(2048 * 25.0 * k * 0.02)
        rate = counter.add(20_000 * k, counts + (1 if k == 60 else 0))
    assert rate == pytest.approx(25.0, rel=2e-3)
    for k in range(100, 160):
        rate = counter.add(20_000 * k, round(2048 * 25.0 * 99 * 0.02))
    assert rate == 0.0


def test_cautions_and_their_acknowledgement() -> None:
    text = " ".join(CAUTIONS)
    for words in ("not a safety-rated stop", "60 V DC", "300 mm", "eye protection", "lithium", "Local codes"):
        assert words.lower() in text.lower()
    signed = Acknowledgement("A. Person", "abc", 1000.0)
    assert signed.holds("abc", 1000.0 + 7.9 * 3600.0)
    assert not signed.holds("abc", 1000.0 + 8.1 * 3600.0)
    assert not signed.holds("other", 1001.0)
    assert not signed.holds("abc", 999.0)  # the clock was set back


def test_travel_limits_lie_beyond_the_stops() -> None:
    """A body on its stop is a result, not a trip: bouncing for seconds does not halt the run."""
    run = go([Ramp(to_v=6.0, slew_v_per_s=1.0), Hold(for_s=5.0)])
    assert run.outcome.exit_code == 0
    rig = read_rig(find("boom"))
    assert rig.limits.travel_high_rad > rig.stops.high_rad and math.isfinite(rig.limits.travel_low_rad)
