"""From a simulated run to its file: the same bytes twice, and the flap rate again with h5py alone."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import asdict, replace
from pathlib import Path

import h5py
import numpy as np
import pytest

from drivers.clock import VirtualClock
from drivers.rows import RowBlock
from drivers.simulated.bench import SimulatedBench
from rig.bench_source import bench_for
from rig.events import Event
from rig.files.rig import read_rig
from rig.record.journal import JournalWriter
from rig.record.sealing import read_recording, seal
from rig.run.loop import Loop
from rig.session import open_session
from rig.shipped import find
from rig.steps import Hold, Mark, Observe, Protocol, Ramp
from rig.verdicts import Verdict

STEPS = (Mark(text="begin"), Ramp(to_v=6.0, slew_v_per_s=3.0), Hold(for_s=2.0), Observe(for_s=2.0))


class Silent:
    def feed(self, blocks: Sequence[RowBlock], events: Sequence[Event]) -> list[Verdict]:
        return []


def record(path: Path, *, seed: int = 1, prepare: Callable[[SimulatedBench], None] | None = None) -> None:
    """A short run on the simulated boom, journalled to `path`."""
    rig = read_rig(find("boom"))
    assert rig.world is not None
    rig = replace(rig, world=replace(rig.world, seed=seed))
    clock = VirtualClock()
    bench = bench_for(rig, clock)
    assert isinstance(bench, SimulatedBench)
    hello = bench.open()
    if prepare is not None:
        prepare(bench)
    header = {
        "tick_hz": hello.tick_hz,
        "row_period_ticks": hello.row_period_ticks,
        "frame_rows": hello.frame_rows,
        "channels": [asdict(channel) for channel in hello.channels],
        "created_utc": "2026-01-01T00:00:00+00:00",
    }
    journal = JournalWriter(path, header)
    protocol = Protocol(name="test", title="", steps=STEPS)
    assert Loop(bench, hello, rig, protocol, journal, Silent(), clock).run().exit_code == 0
    journal.close()


def test_the_same_seed_gives_the_same_journal_to_the_byte(tmp_path: Path) -> None:
    for name, seed in (("one", 1), ("two", 1), ("other", 2)):
        record(tmp_path / name, seed=seed)
    one, two, other = ((tmp_path / name).read_bytes() for name in ("one", "two", "other"))
    assert one == two
    assert one != other


def test_flap_rate_again_from_raw_scale_and_offset(tmp_path: Path) -> None:
    """h5py and numpy alone; the truth is what the simulated crank really did."""
    truth: dict[int, float] = {}

    def look(bench: SimulatedBench) -> None:
        def note(tick: int) -> None:
            truth[tick] = bench.truth()["crank_rad"]

        for tick in (4_500_000, 5_900_000):
            bench.faults.at(tick, lambda _, tick=tick: note(tick))  # type: ignore[misc]

    record(tmp_path / "a.journal", prepare=look)
    seal(tmp_path / "a.journal", tmp_path / "a.h5")
    (early, early_rad), (late, late_rad) = sorted(truth.items())
    true_hz = (late_rad - early_rad) / (2.0 * math.pi * (late - early) * 1e-6)
    assert true_hz > 10.0
    with h5py.File(tmp_path / "a.h5") as file:
        board = file["streams/board"]
        kinds = [kind.decode() for kind in file["events/kind"][:]]
        begin, end = (int(file["events/tick"][kinds.index(kind)]) for kind in ("observe", "observe_end"))
        assert begin < early and late < end
        crank = next(one for one in board.values() if one.attrs.get("measures") == "crank angle")
        assert crank.attrs["unit"] == "rad"
        angle = crank[:] * crank.attrs["scale"] + crank.attrs["offset"]
        first, last = np.searchsorted(board["tick"][:], [early, late])
        turned = (angle[last] - angle[first]) / (2.0 * math.pi)
        found_hz = turned / (board["time_s"][last] - board["time_s"][first])
        # Two counts of 2048 and one row, over 1.4 s.
        assert found_hz == pytest.approx(true_hz, rel=2e-3)
        volts = next(one for one in board.values() if one.attrs.get("measures") == "motor voltage")
        volt = (volts[first:last] * volts.attrs["scale"] + volts.attrs["offset"]).mean()
        assert volt == pytest.approx(6.0, abs=0.02)


def test_lost_frames_are_in_journal_and_session(tmp_path: Path) -> None:
    """Two frames of 20 rows each vanish on the way: told in all three places, and seen in the ticks."""

    def lose(bench: SimulatedBench) -> None:
        bench.faults.at(5_000_000, lambda faults: faults.lose_frames(2))

    record(tmp_path / "a.journal", prepare=lose)
    recording = read_recording(tmp_path / "a.journal")
    assert [loss[1:] for loss in recording.losses] == [(40, 2, 0)]
    seal(tmp_path / "a.journal", tmp_path / "a.h5")
    with h5py.File(tmp_path / "a.h5") as file:
        assert [int(file[f"losses/{name}"][0]) for name in ("rows", "frames", "overruns")] == [40, 2, 0]
        when = int(file["losses/tick"][0])
        tick = file["streams/board/tick"][:].astype(np.int64)
        (gap,) = np.flatnonzero(np.diff(tick) != 1000)
        assert tick[gap + 1] == when and tick[gap + 1] - tick[gap] == 41_000
        kinds = [kind.decode() for kind in file["events/kind"][:]]
        assert kinds.count("loss") == 1 and int(file["events/tick"][kinds.index("loss")]) == when
    with open_session(tmp_path / "a.h5") as session:
        told = [block.lost_rows for block in session.streams["board"].blocks(10_000) if block.lost_rows]
        assert told == [40]
