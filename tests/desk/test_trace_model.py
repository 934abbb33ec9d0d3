"""Columns, turns, sources, folding and ranges: what the traces are made of, without a window."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_plots import FLAP_HZ, MIDDLE_RAD, RIPPLE_RAD, block, rig, ring, rows, stream

from analysis.position import turn_means
from rig.bench.ring import RingWriter
from rig.bench_source import channel_table
from rig.desk.model.columns import Columns, TurnMeans, columns_of
from rig.desk.model.fold import fold
from rig.desk.model.ranges import CalmRange, nice_step, ticks
from rig.desk.model.run_model import RunModel
from rig.desk.model.trace_model import RingSource, StoredSource


@pytest.fixture
def writer(tmp_path: Path) -> Iterator[RingWriter]:
    made = ring(tmp_path / "ring")
    yield made
    made.close()


def body_deg(count: int, first: int = 0) -> np.ndarray:
    channel = channel_table(rig())[0]
    return np.degrees(channel.values(rows(count, first)[:, 0]))


# -- columns -------------------------------------------------------------------------------------------


@settings(deadline=None)
@given(st.lists(st.integers(1, 400), min_size=1, max_size=8), st.integers(1, 60), st.integers(0, 2**31))
def test_columns_hold_the_extremes_however_the_rows_came(sizes: list[int], wide: int, seed: int) -> None:
    """Against extremes of the same rows taken at once with plain numpy."""
    generator = np.random.default_rng(seed)
    count = sum(sizes)
    tick = 1000 * (np.arange(count) + int(generator.integers(0, 1000)))
    raw = generator.integers(-1000, 1000, (count, 2)).astype(np.int32)
    columns = Columns(1000 * wide, 1e12)
    for start, size in zip(np.cumsum([0, *sizes[:-1]]), sizes, strict=True):
        part = slice(start, start + size)
        columns.add(tick[part], raw[part] - 1, raw[part] + 1, np.zeros(size, bool))
    number = tick // (1000 * wide)
    for at, which in enumerate(np.unique(number)):
        inside = raw[number == which]
        assert np.array_equal(columns.low[at], inside.min(axis=0) - 1)
        assert np.array_equal(columns.high[at], inside.max(axis=0) + 1)
        assert columns.tick[at] == tick[number == which][[0, -1]].mean()
    assert len(columns.tick) == len(np.unique(number)) and columns.last_tick == tick[-1]


def test_columns_forget_what_is_older_than_their_span() -> None:
    columns = Columns(10.0, 1000.0)
    for start in range(0, 100_000, 1000):
        tick = np.arange(start, start + 1000)
        raw = tick.astype(np.int32)[:, None]
        columns.add(tick, raw, raw, np.zeros(1000, bool))
    assert 98_980 <= columns.low[0, 0] <= 99_000 and len(columns.low) <= 102


def test_a_loss_breaks_the_line_at_its_column_only() -> None:
    columns = Columns(10.0, 1e9)
    tick = np.arange(100)
    broken = np.zeros(100, bool)
    broken[57] = True
    columns.add(tick, tick[:, None].astype(np.int32), tick[:, None].astype(np.int32), broken)
    assert np.flatnonzero(columns.broken).tolist() == [5]
    places = columns_of(tick / 10.0, tick.astype(float), tick.astype(float), 1.0)
    assert places[0].tolist() == pytest.approx([0.45 + k for k in range(10)])


def test_means_over_turns_are_those_of_the_analysis_whatever_the_blocks() -> None:
    """`analysis.position.turn_means` over all rows at once is the reference; the sine's mean is its middle."""
    time_s = np.arange(3000) / 1000.0
    crank = 2.0 * np.pi * FLAP_HZ * time_s
    value = MIDDLE_RAD + RIPPLE_RAD * np.sin(crank)
    turns = TurnMeans()
    for start in range(0, 3000, 33):
        part = slice(start, start + 33)
        turns.add(time_s[part], value[part], crank[part], np.zeros(len(time_s[part]), bool))
    middle, mean = turn_means(time_s, value, crank)
    assert len(turns.mean) == len(mean) == 89
    assert np.allclose(turns.middle_s, middle, atol=1e-9)
    assert np.allclose(turns.mean, mean, atol=0.003 * RIPPLE_RAD)
    assert np.allclose(turns.mean, MIDDLE_RAD, atol=0.005 * RIPPLE_RAD)
    assert np.allclose(turns.flap_hz, FLAP_HZ, rtol=1e-6)


def test_a_turn_with_missing_rows_has_no_mean() -> None:
    time_s = np.concatenate((np.arange(1000), np.arange(1500, 2500))) / 1000.0
    crank = 2.0 * np.pi * FLAP_HZ * time_s
    broken = np.zeros(2000, bool)
    broken[1000] = True
    turns = TurnMeans()
    turns.add(time_s, np.ones(2000), crank, broken)
    assert not np.any((turns.middle_s > 0.99) & (turns.middle_s < 1.5))
    assert turns.broken.sum() == 1 and turns.middle_s[turns.broken][0] > 1.5


# -- sources -------------------------------------------------------------------------------------------


def test_a_ring_that_is_not_there_yet_is_waited_for(tmp_path: Path) -> None:
    source = RingSource(tmp_path / "ring", rig())
    assert source.latest(2.0) is None and source.recent(1.0) is None and source.state == "waiting"
    writer = ring(tmp_path / "ring")
    assert source.latest(2.0) is None and source.state == "live"
    writer.add(block(50))
    found = source.latest(2.0)
    assert found is not None and found.now_s == pytest.approx(0.049)
    writer.close()
    source.latest(2.0)
    assert source.state == "ended"
    source.close()
    source.close()
    assert source.latest(2.0) is None


def test_a_ring_of_another_version_is_told_in_a_sentence(tmp_path: Path) -> None:
    path = tmp_path / "ring"
    ring(path).close()
    data = bytearray(path.read_bytes())
    data[7] = 9
    path.write_bytes(bytes(data))
    source = RingSource(path, rig())
    assert source.latest(2.0) is None and "version" in source.state


def test_rows_of_a_ring_in_the_units_shown(tmp_path: Path, writer: RingWriter) -> None:
    source = RingSource(tmp_path / "ring", rig())
    for start in range(0, 3000, 20):
        writer.add(block(20, start))
        if start % 500 == 0:
            source.latest(1.0, 500)
    found = source.latest(1.0, 500)
    assert found is not None
    assert source.signals == ("body angle", "motor voltage", "vertical load", "motor current", "flap rate")
    body, truth = found.by["body angle"], body_deg(3000)
    assert body.unit == "deg" and 500 <= len(body.time_s) <= 502
    for at in (0, 1, 250, len(body.time_s) - 2):
        first = round((body.time_s[at] - 0.0005) * 1000)  # columns of two rows
        assert body.low[at] == pytest.approx(truth[first : first + 2].min(), abs=1e-9)
        assert body.high[at] == pytest.approx(truth[first : first + 2].max(), abs=1e-9)
    assert np.all(body.low <= body.high), "a channel that counts backwards was not turned round"
    assert found.by["motor voltage"].low[0] == found.by["motor voltage"].high[-1] == 8.0
    assert found.mean is not None and np.allclose(found.mean.low, np.degrees(MIDDLE_RAD), atol=0.01)
    assert np.allclose(found.by["flap rate"].low, FLAP_HZ, rtol=0.005)
    assert found.now_s == pytest.approx(2.999) and found.newest == 2999


def test_rows_that_were_lost_or_overwritten_break_the_lines(tmp_path: Path) -> None:
    writer = ring(tmp_path / "ring", bins=512)
    source = RingSource(tmp_path / "ring", rig())
    writer.add(block(100))
    source.latest(2.0, 2000)
    writer.add(block(100, 300, lost=200))
    found = source.latest(2.0, 2000)
    assert found is not None
    load = found.by["vertical load"]
    assert load.time_s[load.broken].tolist() == pytest.approx([0.3])
    writer.add(block(2000, 400))  # far more than the ring holds
    found = source.latest(4.0, 4000)
    assert found is not None and len(found.by["vertical load"].time_s) <= 512
    writer.close()


def test_time_counts_from_where_the_run_says(tmp_path: Path, writer: RingWriter) -> None:
    source = RingSource(tmp_path / "ring", rig())
    writer.add(block(100))
    model = RunModel()
    model.origin_tick = 6000 * 1000
    source.follow(model)
    found = source.latest(2.0)
    assert found is not None and found.now_s == pytest.approx(1.099)


def test_a_stored_stream_shows_what_lies_before_its_position() -> None:
    source = StoredSource(stream(5000), rig())
    assert source.latest(2.0) is None, "nothing lies before the beginning"
    truth = body_deg(5000)
    for at_s in (1.5, 4.0, 1.0):
        source.position_tick = (7000 + round(1000 * at_s)) * 1000
        found = source.latest(1.0, 1000)
        assert found is not None and found.now_s == pytest.approx(at_s)
        body = found.by["body angle"]
        first = round(body.time_s[0] * 1000)
        assert body.time_s[0] == pytest.approx(at_s - 1.0) and body.time_s[-1] == pytest.approx(at_s)
        assert np.allclose(body.low, truth[first : first + len(body.low)], atol=1e-9)
        assert found.mean is not None and np.allclose(found.mean.low, np.degrees(MIDDLE_RAD), atol=0.01)
    model = RunModel()
    model.tick = (7000 + 3000) * 1000
    source.follow(model)
    found = source.latest(1.0)
    assert found is not None and found.now_s == 3.0


def test_a_loss_in_a_stored_stream_breaks_the_line() -> None:
    source = StoredSource(stream(2000, lost=(1000, 500)), rig())
    source.position_tick = (7000 + 2400) * 1000
    found = source.latest(2.0, 2000)
    assert found is not None
    load = found.by["vertical load"]
    assert load.time_s[load.broken].tolist() == pytest.approx([1.5])


# -- folding -------------------------------------------------------------------------------------------


def test_signals_of_the_phase_fold_back_to_it() -> None:
    """The load is a cosine of the phase, the current a sine of twice the phase, by construction."""
    source = StoredSource(stream(3000), rig())
    source.position_tick = (7000 + 2500) * 1000
    recent = source.recent(1.5)
    assert recent is not None
    folded = fold(recent)
    assert folded is not None and 43 <= folded.turns <= 45
    load, current = folded.by["vertical load"], folded.by["motor current"]
    phase = np.radians(load.phase_deg)
    # A column is 4 deg wide, so its rows lie within 2 deg of the middle.
    assert np.allclose(load.mean, np.cos(phase), atol=np.radians(2.5))
    assert np.all(load.low <= load.mean + 1e-9) and np.all(load.mean <= load.high + 1e-9)
    assert np.allclose(current.mean, 0.5 + 0.1 * np.sin(2.0 * np.radians(current.phase_deg)), atol=0.01)
    assert 32 <= len(load.last) <= 34 and np.all(np.diff(load.last_phase_deg) > 0.0)
    assert np.allclose(load.last, np.cos(np.radians(load.last_phase_deg)), atol=0.01)


def test_a_crank_at_rest_folds_to_nothing() -> None:
    source = StoredSource(stream(60), rig())
    source.position_tick = (7000 + 50) * 1000
    recent = source.recent(0.05)
    assert recent is not None and fold(recent) is None


# -- ranges --------------------------------------------------------------------------------------------


def test_a_range_widens_at_once_and_narrows_only_after_a_while() -> None:
    kept = CalmRange(1.0)
    assert kept.take(0.0, 10.0, 0.0) and kept.low < 0.0 and kept.high > 10.0
    before = kept.low, kept.high
    for at in range(100):  # noise at the edges moves nothing
        assert not kept.take(0.0 - 0.01 * (at % 3), 10.0 + 0.01 * (at % 5), 0.03 * at)
    assert (kept.low, kept.high) == before
    assert kept.take(0.0, 20.0, 3.1) and kept.high > 20.0
    times = np.arange(3.2, 12.0, 0.033)
    changes = [at for at in times if kept.take(1.0, 2.0, float(at))]
    assert len(changes) == 1 and changes[0] - 3.2 >= 3.0
    assert kept.low <= 1.0 and 2.0 <= kept.high <= 3.0


def test_noise_is_not_blown_up() -> None:
    kept = CalmRange(2.0)
    kept.take(5.0, 5.001, 0.0)
    assert kept.high - kept.low >= 2.0 and not kept.take(float("nan"), 1.0, 1.0)


@settings(deadline=None)
@given(st.floats(-1e6, 1e6), st.floats(1e-6, 1e6), st.integers(2, 8))
def test_numbers_along_a_scale_are_round_and_few(low: float, width: float, most: int) -> None:
    high = low + width
    if width < 1e-9 * abs(low):
        return  # beyond the digits of a float
    made = ticks(low, high, most)
    values = [value for value, _ in made]
    assert 2 <= len(made) <= max(most + 1, 5)
    assert all(low - 1e-6 * width <= value <= high + 1e-6 * width for value in values)
    assert np.allclose(np.diff(values), values[1] - values[0], rtol=1e-6)
    lead = (values[1] - values[0]) / 10.0 ** np.floor(np.log10((values[1] - values[0]) * (1 + 1e-6)))
    assert min(abs(lead - round_) for round_ in (1.0, 2.0, 5.0)) < 1e-4
    assert nice_step(width, most) * most >= width * (1 - 1e-6)
