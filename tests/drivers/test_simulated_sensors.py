"""What the simulated sensors do to the true values."""

from __future__ import annotations

import math

import numpy as np
import pytest
from conformance import Owner
from numpy.typing import NDArray
from simulated_rigs import BOOM, CHANNELS, SENSORS, make_bench

from analysis.mechanism.plant import OUT_CRANK, ROW_COLUMNS
from drivers.channels import Channel, ChannelTable
from drivers.simulated import readout as ro
from drivers.simulated.sensors import delay_weights
from drivers.simulated.world import SensorFacts

TRUE_WEIGHT_N = (0.072 + 0.130 + 0.100) * 9.80665  # everything on the load cell, by hand


def at_rest(duration_s: float, **world: object) -> Owner:
    bench = make_bench(**world)  # type: ignore[arg-type]
    owner = Owner(bench, bench.open())
    owner.run(0.5)
    owner.blocks.clear()
    owner.run(duration_s)
    return owner


def sampled(values: NDArray[np.float64], spec: dict[int, float], old: int) -> NDArray[np.int32]:
    """`read_out` on a made-up crank angle."""
    rows = len(values) - old
    trace = np.zeros((len(values), ROW_COLUMNS))
    trace[:, OUT_CRANK] = values
    specification = np.zeros((1, ro.SPECIFICATION))
    specification[0, ro.SOURCE] = OUT_CRANK
    for column, value in spec.items():
        specification[0, column] = value
    raw = np.empty((rows, 1), dtype=np.int32)
    ro.read_out(trace, old, rows, specification, np.zeros((rows, 2)), np.zeros(ro.MEMORY), raw)
    return raw[:, 0]


def test_noise_is_white_and_of_the_stated_size() -> None:
    owner = at_rest(8.0)
    for measures, sigma in (("motor current", 0.02), ("motor voltage", 0.01), ("vertical load", 0.02)):
        _, values = owner.values(measures, owner.blocks)
        step = abs(CHANNELS[CHANNELS.measuring(measures) or 0].scale)
        # Rounding adds step^2 / 12 (Bennett 1948).
        wanted = math.hypot(sigma, step / math.sqrt(12.0))
        n = len(values)
        assert abs(values.std() / wanted - 1.0) < 4.0 / math.sqrt(2.0 * n)
        centred = values - values.mean()
        assert abs((centred[1:] * centred[:-1]).mean() / centred.var()) < 4.0 / math.sqrt(n)


def test_the_load_cell_bears_the_weight() -> None:
    owner = at_rest(2.0)
    _, load = owner.values("vertical load", owner.blocks)
    assert abs(load.mean() - TRUE_WEIGHT_N) < 5.0 * 0.02 / math.sqrt(len(load)) + 1e-3


def test_the_zero_of_the_load_cell_walks_at_random() -> None:
    per_rt_s = 0.05
    moves = []
    for seed in range(6):
        owner = at_rest(12.0, load_drift_n_per_rt_s=per_rt_s, seed=seed)
        _, load = owner.values("vertical load", owner.blocks)
        moves += list(np.diff(load.reshape(-1, 1000).mean(axis=1)))
    # Means over neighbouring seconds of a random walk differ with variance 2/3 of that of one second.
    wanted = per_rt_s * math.sqrt(2.0 / 3.0)
    assert abs(np.std(moves) / wanted - 1.0) < 0.35


def test_a_converter_saturates_at_its_limits() -> None:
    narrow = ChannelTable((Channel("load", "vertical load", "N", 5.0 / 2048, low_raw=-2048, high_raw=2047),))
    bench = make_bench(channels=narrow, sensors={})
    owner = Owner(bench, bench.open())
    bench.enable()
    bench.drive(10.0, 5.0)
    counts = np.concatenate([block.raw[:, 0] for block in owner.run(4.0)])
    assert counts.max() == 2047
    assert counts.min() >= -2048
    assert (counts == 2047).sum() > 50


def test_an_encoder_counts_whole_steps_and_runs_over() -> None:
    step = 2.0 * math.pi / 2048
    counts = np.array([2**31 - 2, 2**31 - 1, 2**31, 2**31 + 5, -(2**31) - 1, 7, -7], dtype=np.int64)
    spec = {ro.SCALE: step, ro.ENCODER: 1.0, ro.WEIGHT: 1.0, ro.LOW: -100.0, ro.HIGH: 100.0}
    raw = sampled(np.concatenate([np.zeros(3), (counts + 0.2) * step]), spec, 3)
    assert np.array_equal(raw, counts.astype(np.int32))  # two's complement, as numpy casts


def test_encoders_follow_the_truth_within_half_a_step() -> None:
    bench = make_bench()
    owner = Owner(bench, bench.open())
    bench.enable()
    bench.drive(5.0, 5.0)
    for _ in range(30):
        block = owner.run(0.02)[-1]
        truth = bench.truth()
        body = CHANNELS[0].values(block.raw[-1, 0])
        crank = CHANNELS[1].values(block.raw[-1, 1])
        assert abs(body - truth["body_rad"]) <= math.pi / 8192 + 1e-12
        assert abs(crank - truth["crank_rad"]) <= math.pi / 2048 + 1e-12


@pytest.mark.parametrize("rows", [0.0, 0.25, 0.5, 1.0, 1.7, 3.2])
def test_a_delayed_channel_shows_the_past(rows: float) -> None:
    whole, weights = delay_weights(rows)
    old = whole + ro.DELAY_NODES - 1
    per_row = 2.0 * math.pi * 43.0 / 1000.0  # 43 Hz at 1 kHz
    k = np.arange(-old, 400)
    spec = {ro.SCALE: 1e-6, ro.WHOLE_DELAY: float(whole), ro.LOW: -1e9, ro.HIGH: 1e9}
    spec |= {ro.WEIGHT + j: weight for j, weight in enumerate(weights)}
    raw = sampled(np.sin(per_row * k), spec, old)
    wanted = np.sin(per_row * (np.arange(400) - rows))
    # Bound of the cubic's error term, h^4 / 24 x |part (part-1)(part-2)(part-3)|.
    part = rows - whole
    bound = per_row**4 / 24.0 * abs(part * (part - 1.0) * (part - 2.0) * (part - 3.0)) + 1e-6
    assert np.abs(raw * 1e-6 - wanted).max() <= bound


@pytest.mark.parametrize("rows", [-0.1, 1001.0, float("nan")])
def test_a_delay_that_cannot_be_is_refused(rows: float) -> None:
    with pytest.raises(ValueError):
        delay_weights(rows)


def test_polarity_and_zero_go_into_the_raw_values_only() -> None:
    turned = ChannelTable(
        (
            Channel("body", "body angle", "rad", -2.0 * math.pi / 8192, offset=0.3),
            Channel("voltage", "motor voltage", "V", -0.001, offset=1.5),
        )
    )
    bench = make_bench(channels=turned, sensors={"body": SensorFacts(counts_per_turn=8192)})
    owner = Owner(bench, bench.open())
    bench.enable()
    bench.drive(3.0, 10.0)
    block = owner.run(0.5)[-1]
    assert abs(turned[0].values(block.raw[-1, 0]) - bench.truth()["body_rad"]) < 4e-4
    assert turned[1].values(block.raw[-1, 1]) == pytest.approx(3.0, abs=1e-3)
    assert block.raw[-1, 1] == pytest.approx((3.0 - 1.5) / -0.001, abs=1.0)


def test_air_temperature_and_missing_sensors() -> None:
    owner = at_rest(0.1, ambient_deg_c=21.0)
    _, air = owner.values("temperature", owner.blocks)
    assert np.all(air == 21.0)
    for measures, unit in (("tap force", "N"), ("other", "1")):
        with pytest.raises(ValueError, match="no sensor"):
            make_bench(channels=ChannelTable((Channel("x", measures, unit, 1.0),)))
    with pytest.raises(ValueError, match="encoder"):
        make_bench(sensors={**SENSORS, "load": SensorFacts(counts_per_turn=100)})


def test_the_tapper_scatters_and_keeps_its_seed() -> None:
    def potential(angle_rad: float) -> float:
        return 0.072 * 9.80665 * (0.000711 * math.sin(angle_rad) + 0.030 * math.cos(angle_rad))

    def impulses(seed: int, taps: int) -> list[float]:
        """From how far the head rises off its stop: impulse = sqrt(2 x inertia x gain in potential)."""
        bench = make_bench(seed=seed, tap_duration_s=0.002, body_torque_noise_n_m_per_rt_hz=0.0)
        owner = Owner(bench, bench.open())
        owner.run(0.5)
        found = []
        for _ in range(taps):
            bench.tap(8e-5)
            _, angle = owner.values("body angle", owner.run(0.8))
            gain = potential(angle.max()) - potential(BOOM.stop_low_rad)
            found.append(math.sqrt(2.0 * 1.5416e-4 * gain))
        return found

    first = impulses(1, 60)
    assert first[:8] == impulses(1, 8)
    assert first[:8] != impulses(2, 8)
    n = len(first)
    assert abs(np.mean(first) / 8e-5 - 1.0) < 4.0 * 0.2 / math.sqrt(n) + 0.03
    assert abs(np.std(first) / np.mean(first) / 0.2 - 1.0) < 4.0 / math.sqrt(2.0 * n)


def test_the_boom_rests_on_its_lower_stop() -> None:
    owner = at_rest(0.5)
    _, body = owner.values("body angle", owner.blocks)
    # Gravity torque over stop stiffness: m g (d cos - h sin) / k below the stop, by hand.
    sink = 0.072 * 9.80665 * (0.000711 + 0.030 * math.radians(4.0)) / 30.0
    assert body.mean() == pytest.approx(BOOM.stop_low_rad - sink, abs=4e-4)
