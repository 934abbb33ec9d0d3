"""The rows of a session: columns as arrays with units, blocks for analysis, overviews for drawing."""

from __future__ import annotations

import functools
import itertools
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from drivers.channels import Channel, ChannelTable
from drivers.rows import RowBlock
from rig.record import overview
from rig.record.errors import Damaged
from rig.record.parts import number_attribute, text_attribute, whole_attribute
from rig.record.rowclock import RowClock

#: Rows read at a time where a column is gone through: whole chunks of the file.
READ_ROWS = 1 << 16


class Stream:
    """The rows of one sampler. Columns are read when asked for and kept."""

    def __init__(self, group: h5py.Group, path: Path, losses: Sequence[tuple[int, ...]] = ()) -> None:
        self._group = group
        self._path = path
        self.losses = tuple(losses)  # tick of the row after, rows, frames, overruns
        self._cache: dict[str, NDArray[Any]] = {}
        self.tick_hz = whole_attribute(group, "tick_hz", path)
        self.row_period_ticks = whole_attribute(group, "row_period_ticks", path)
        self.frame_rows = whole_attribute(group, "frame_rows", path)
        for name in ("tick", "time_s", "status"):
            if name not in group:
                raise Damaged(f"{path} is damaged: {group.name}/{name} is missing")
        if self.tick_hz < 1:
            raise Damaged(f"{path}: stream {group.name} counts {self.tick_hz} ticks a second")
        named = [
            (whole_attribute(data, "column", path), name)
            for name, data in group.items()
            if "column" in data.attrs
        ]
        if sorted(column for column, _ in named) != list(range(len(named))):
            raise Damaged(f"{path}: stream {group.name} has columns of one number or none")
        names = [name for _, name in sorted(named)]
        self.channels = ChannelTable(tuple(_channel(name, group[name], path) for name in names))
        length = len(group["tick"])
        for name in ("time_s", "status", *names):
            if len(group[name]) != length:
                raise Damaged(f"{path}: stream {group.name} has columns of different length ({name})")

    def __len__(self) -> int:
        return len(self._group["tick"])

    @property
    def tick(self) -> NDArray[np.uint64]:
        """Board ticks, unwrapped, uint64, shape (n,), strictly increasing."""
        if "tick" not in self._cache:
            tick = self._read("tick")
            if np.any(tick[1:] <= tick[:-1]):
                del self._cache["tick"]
                raise self._backward()
        return self._cache["tick"]

    @property
    def time_s(self) -> NDArray[np.float64]:
        """Board time since the first row, s, shape (n,)."""
        return self._read("time_s")

    @property
    def first_tick(self) -> int:
        """Tick of the first row, 0 without rows; the columns stay unread."""
        return self._ends[0]

    @property
    def last_tick(self) -> int:
        """Tick of the last row, 0 without rows; the columns stay unread."""
        return self._ends[1]

    @property
    def duration_s(self) -> float:
        """Board time from the first row to the last, s; the columns stay unread."""
        first, last = self._ends
        return (last - first) / self.tick_hz

    @property
    def status(self) -> NDArray[np.uint16]:
        """`drivers.rows.Status` bits, shape (n,)."""
        return self._read("status")

    def raw(self, name: str) -> NDArray[np.int32]:
        """Raw integers of a channel, shape (n,); KeyError if there is none of that name."""
        self.channels.index(name)
        return self._read(name)

    def __getitem__(self, name: str) -> NDArray[np.float64]:
        """Values of a channel in its unit, shape (n,)."""
        return self.channels[self.channels.index(name)].values(self.raw(name))

    def unit(self, name: str) -> str:
        return self.channels[self.channels.index(name)].unit

    def measuring(self, measures: str) -> NDArray[np.float64] | None:
        """Values of the channel that measures e.g. "body angle", or None."""
        column = self.channels.measuring(measures)
        return None if column is None else self[self.channels[column].name]

    def overview(
        self, name: str, start_tick: int, end_tick: int, bins: int
    ) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
        """Time, smallest and largest value of a channel from start_tick up to end_tick, at least `bins` of each
        if there are as many rows: s since the first row, of the first row of each bin; unit of the channel.

        Bins of 16, 256 ... rows where these are enough, else the rows themselves (low = high). Bins at both
        ends are whole. No more is read than is told. KeyError if there is no such channel.
        """
        channel = self.channels[self.channels.index(name)]
        if bins < 1:
            raise ValueError("an overview needs at least one bin")
        first, end = self._row(start_tick), self._row(end_tick)
        if end <= first:
            return np.empty(0), np.empty(0), np.empty(0)
        size = overview.coarsest(overview.levels(len(self)), first, end, bins)
        first_bin, end_bin = first // size, overview.bins_of(end, size)
        pairs = self._bins(name, size, first_bin, end_bin)
        values = channel.values(pairs)
        values.sort(axis=1)  # a negative scale turns them round
        return self._times_s(np.arange(first_bin, end_bin) * size), values[:, 0], values[:, 1]

    def _bins(self, name: str, size: int, first: int, end: int) -> NDArray[np.int32]:
        place = f"{self._overview_of(name)}/{size}"
        if size > 1 and place in self._group.file:
            level = self._group.file[place]
            if level.dtype != np.dtype("i4") or level.shape != (overview.bins_of(len(self), size), 2):
                raise Damaged(f"{self._path}: {place} does not belong to its column")
            return self._part(level, first, end)
        return overview.of_rows(self._part(self._group[name], first * size, end * size), size)

    @functools.cached_property
    def _ends(self) -> tuple[int, int]:
        """The first and the last tick; (0, 0) without rows."""
        if not len(self):
            return 0, 0
        first, last = (int(self._part(self._group["tick"], row, row + 1)[0]) for row in (0, len(self) - 1))
        return first, last

    @functools.cached_property
    def _clock(self) -> RowClock | None:
        """The rows' times without their column; None where only the column can tell."""
        if not len(self):
            return None
        first, last = self._ends
        lost = [(loss[0], loss[1]) for loss in self.losses if loss[1]]
        try:
            return RowClock(first, last, len(self), self.row_period_ticks, lost)
        except (ValueError, OverflowError):
            return None

    def _row(self, tick: int) -> int:
        """The first row at or after a tick."""
        if self._clock is not None:
            return self._clock.row(tick)
        return int(np.searchsorted(self.tick, np.uint64(min(max(tick, 0), 2**64 - 1))))

    def _times_s(self, rows: NDArray[np.int64]) -> NDArray[np.float64]:
        if self._clock is not None:
            return (self._clock.tick(rows) - self._clock.tick(np.array([0]))) / self.tick_hz
        return (self.tick[rows] - self.tick[0]).astype(np.float64) / self.tick_hz

    def blocks(self, rows_per_block: int) -> Iterator[RowBlock]:
        """The rows again as blocks, in order, for analysis and replay; read as they are asked for.

        A block ends early where the status changes or rows were lost, so that what it says holds for all its
        rows; the loss is told in the block after it.
        """
        if rows_per_block < 1:
            raise ValueError("a block needs at least one row")
        lost = {when: (rows, frames) for when, rows, frames, _ in self.losses}
        at_once = rows_per_block * -(-READ_ROWS // rows_per_block)
        before = -1
        for start in range(0, len(self), at_once):
            tick, status = (self._part(self._group[n], start, start + at_once) for n in ("tick", "status"))
            if int(tick[0]) <= before or np.any(tick[1:] <= tick[:-1]):
                raise self._backward()
            before = int(tick[-1])
            columns = [
                self._part(self._group[channel.name], start, start + at_once) for channel in self.channels
            ]
            raw = np.column_stack(columns).astype(np.int32)
            cuts = np.flatnonzero(np.diff(status)) + 1
            gaps = np.flatnonzero(np.isin(tick, np.array(list(lost), dtype=np.uint64)))
            edges = np.unique(np.concatenate(([0, len(tick)], cuts, gaps)))
            for first, last in itertools.pairwise(edges):
                for begin in range(first, last, rows_per_block):
                    part = slice(begin, min(begin + rows_per_block, last))
                    rows, frames = lost.get(int(tick[begin]), (0, 0))
                    yield RowBlock(
                        tick=tick[part],
                        raw=raw[part],
                        status=int(status[begin]),
                        lost_rows=rows,
                        lost_frames=frames,
                    )

    def part(self, start_tick: int, end_tick: int) -> RowBlock:
        """The rows from start_tick up to end_tick as one block, read for themselves; it tells no losses."""
        first, end = self._row(start_tick), self._row(end_tick)
        columns = [self._part(self._group[channel.name], first, end) for channel in self.channels]
        return RowBlock(
            tick=self._part(self._group["tick"], first, end),
            raw=np.column_stack(columns).astype(np.int32),
            status=0,
        )

    def parts(self, name: str) -> Iterator[NDArray[Any]]:
        """A column of the file as it stands there, piece by piece; "tick", "time_s", "status" or a channel."""
        for start in range(0, len(self), READ_ROWS):
            yield self._part(self._group[name], start, start + READ_ROWS)

    def stored_levels(self, name: str) -> dict[int, NDArray[np.int32]]:
        """The levels of a channel's overview that stand in the file, {rows per bin: (bins, 2)}."""
        place = self._overview_of(name)
        if place not in self._group.file:
            return {}
        levels = self._group.file[place]
        return {int(size): self._part(levels[size], 0, len(levels[size])) for size in levels}

    def _overview_of(self, name: str) -> str:
        return f"/overview{self._group.name.removeprefix('/streams')}/{name}"

    def _read(self, name: str) -> NDArray[Any]:
        if name not in self._cache:
            self._cache[name] = self._part(self._group[name], 0, len(self))
        return self._cache[name]

    def _part(self, data: h5py.Dataset, first: int, end: int) -> NDArray[Any]:
        return _part(data, first, end, self._path)

    def _backward(self) -> Damaged:
        return Damaged(f"{self._path}: the ticks of stream {self._group.name} do not increase")


class SamplerStream:
    """Rows of a text sampler, timed by their arrival; `limits` says what they are not good for."""

    def __init__(self, group: h5py.Group, path: Path) -> None:
        self._group = group
        self._path = path
        self.limits = str(group.attrs.get("limits", ""))
        self.damaged_lines = whole_attribute(group, "damaged_lines", path)
        self.columns = tuple(name for name, data in group.items() if "scale" in data.attrs)
        for name in self.columns:
            text_attribute(group[name], "unit", path)
            number_attribute(group[name], "scale", path)
            number_attribute(group[name], "offset", path)

    @property
    def time_s(self) -> NDArray[np.float64]:
        """Board time of the arrival since the board's first row, s, shape (n,)."""
        return self._read("time_s")

    def unit(self, name: str) -> str:
        return str(self._group[name].attrs["unit"])

    def __getitem__(self, name: str) -> NDArray[np.float64]:
        """Values of a column in its unit, shape (n,); KeyError if there is none of that name."""
        told = self._group[name].attrs
        return self._read(name) * float(told["scale"]) + float(told["offset"])

    def _read(self, name: str) -> NDArray[Any]:
        return _part(self._group[name], 0, len(self._group[name]), self._path)


def _part(data: h5py.Dataset, first: int, end: int, path: Path) -> NDArray[Any]:
    # Columns are read late, so damage inside one shows only here.
    try:
        return data[first:end]
    except (OSError, RuntimeError):
        raise Damaged(f"{path}: {data.name} cannot be read, its data are damaged") from None


def _channel(name: str, data: h5py.Dataset, path: Path) -> Channel:
    return Channel(
        name=name,
        measures=text_attribute(data, "measures", path),
        unit=text_attribute(data, "unit", path),
        scale=number_attribute(data, "scale", path),
        offset=number_attribute(data, "offset", path),
        delay_s=number_attribute(data, "delay_s", path),
        low_raw=whole_attribute(data, "low_raw", path),
        high_raw=whole_attribute(data, "high_raw", path),
        calibration=text_attribute(data, "calibration", path),
    )
