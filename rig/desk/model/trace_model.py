"""Signals as a few hundred columns of least and greatest values, live from a ring or stored from a session.

Columns are filled as rows come in, so that drawing costs the same at 1 kHz and at 10 kHz, over a second and over a
minute. They begin at multiples of their length on the board's clock: a picture that moves on does not shimmer.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Protocol

import numpy as np
from numpy.typing import NDArray

from drivers.channels import Channel
from rig.bench.ring import RingReader
from rig.bench_source import channel_table
from rig.description import RigDescription
from rig.desk.model.columns import Columns, TurnMeans, columns_of
from rig.desk.model.run_model import RunModel
from rig.desk.model.signals import (
    BODY,
    CRANK,
    UNITS,
    Recent,
    Trace,
    Traces,
    add_turns,
    cut,
    signals_of,
    trace_of,
    trace_of_raw,
)
from rig.record.errors import Damaged

if TYPE_CHECKING:
    from rig.session import Stream

Values = NDArray[np.float64]

#: Columns of a picture unless told otherwise, and how far ahead a stored stream is read.
COLUMNS = 600
AHEAD_S = 5.0
#: As many bins a second as means over turns need: ten or more a turn.
FINE_PER_S = 500.0


class TraceSource(Protocol):
    """Where signals come from. `state` is "waiting", "live", "ended", "stored" or a sentence on what is wrong."""

    state: str
    signals: tuple[str, ...]
    stops_deg: tuple[float, float] | None

    def follow(self, model: RunModel) -> None:
        """Take what the model knows: when the run began, where a replay stands."""

    def latest(self, span_s: float, columns: int = COLUMNS) -> Traces | None:
        """The last `span_s` seconds in about so many columns; None while there is nothing."""

    def recent(self, span_s: float) -> Recent | None:
        """The last rows for folding; None without any or without a crank angle."""


class RingSource:
    """The ring of a bench process. It need not be there yet, and may be closed at any time.

    `rig` says what the channels mean; a channel of the ring that the rig does not name is left out.
    """

    def __init__(self, path: Path, rig: RigDescription) -> None:
        self.path = path
        self.state = "waiting"
        self.stops_deg: tuple[float, float] | None = _stops(rig)
        self._table = channel_table(rig)
        self.signals = signals_of(self._table)
        self._origin_tick: int | None = None
        self._reader: RingReader | None = None
        self._used: list[tuple[int, Channel]] = []
        self._seen = -1  # number of the newest bin taken
        self._bin_ticks = 0.0
        self._columns: Columns | None = None
        self._means = TurnMeans()
        self._asked: tuple[float, int] = (0.0, 0)

    def follow(self, model: RunModel) -> None:
        if model.origin_tick is not None:
            self._origin_tick = model.origin_tick

    def latest(self, span_s: float, columns: int = COLUMNS) -> Traces | None:
        reader = self._open()
        if reader is None:
            return None
        if (span_s, columns) != self._asked:
            self._asked, self._seen, self._columns = (span_s, columns), -1, None
        self._take(reader, span_s, columns)
        held = self._columns
        if held is None or not len(held.tick):
            return None
        hz, origin = reader.tick_hz, self._origin_tick or 0
        low, high = held.low, held.high
        time_s = (held.tick - origin) / hz
        by: dict[str, Trace] = {}
        for column, (_, channel) in enumerate(self._used):
            trace = trace_of_raw(channel, time_s, low[:, column], high[:, column], held.broken)
            if trace is not None:
                by.setdefault(channel.measures, trace)
        mean = add_turns(by, self._means, origin / hz)
        return Traces(by, mean, (held.last_tick - origin) / hz, self._seen)

    def recent(self, span_s: float) -> Recent | None:
        reader = self._open()
        if reader is None:
            return None
        bins = reader.bins(round(span_s * self._bins_per_s(reader)))
        crank = self._table.measuring(CRANK)
        if not len(bins) or crank is None or self._table[crank].name not in reader.names:
            return None
        time_s = (bins["tick"].astype(np.float64) - (self._origin_tick or 0)) / reader.tick_hz
        broken = bins["lost_rows"] > 0
        by: dict[str, Trace] = {}
        crank_rad = np.empty(0)
        for column, channel in self._used:
            low, high = bins["low"][:, column], bins["high"][:, column]
            if channel.measures == CRANK:
                crank_rad = channel.values(0.5 * (low.astype(np.float64) + high))
            trace = trace_of_raw(channel, time_s, low, high, broken)
            if trace is not None:
                by.setdefault(channel.measures, trace)
        return Recent(time_s, crank_rad, by)

    def close(self) -> None:
        """Let go of the file; safe to repeat."""
        if self._reader is not None:
            self._reader.close()
            self._reader = None
            self._seen, self._columns = -1, None

    def _open(self) -> RingReader | None:
        if self._reader is None and self.state in ("waiting", "live"):
            try:
                self._reader = RingReader(self.path)
            except FileNotFoundError:
                return None
            except Damaged as damage:
                # The writer makes the file before it says what it is.
                self.state = "waiting" if "is not a ring" in str(damage) else str(damage)
                return None
            except OSError as error:
                self.state = f"{self.path} cannot be read: {error.strerror}"
                return None
            names = {channel.name: channel for channel in self._table}
            self._used = [(at, names[name]) for at, name in enumerate(self._reader.names) if name in names]
        if self._reader is not None:
            self.state = "ended" if self._reader.header().closed else "live"
        return self._reader

    def _bins_per_s(self, reader: RingReader) -> float:
        return reader.tick_hz / (self._bin_ticks or reader.tick_hz / 1000.0)

    def _take(self, reader: RingReader, span_s: float, columns: int) -> None:
        """What has come since the last time goes into the columns."""
        fresh = self._columns is None
        if fresh:
            self._learn_pace(reader)
            self._means = TurnMeans(span_s)
        wanted = int(span_s * self._bins_per_s(reader)) + 2
        bins = reader.bins(wanted, -1 if fresh else self._seen)
        if not len(bins):
            return
        tick = bins["tick"].astype(np.int64)
        if fresh:
            step = max(1, round(span_s * reader.tick_hz / columns / self._bin_ticks))
            self._columns = Columns(step * self._bin_ticks, span_s * reader.tick_hz)
        if self._origin_tick is None:
            # Until the run says when it began, its first row does, as long as that is kept.
            oldest = bins if bins["number"][0] == 0 else reader.bins(reader.capacity)
            if len(oldest) and oldest["number"][0] == 0:
                self._origin_tick = int(oldest["tick"][0])
        held = self._columns
        assert held is not None
        places = [place for place, _ in self._used]
        low, high = bins["low"][:, places], bins["high"][:, places]
        broken = bins["lost_rows"] > 0
        # Bins that were overwritten before they were read are missing, too.
        broken[0] |= self._seen >= 0 and int(bins["number"][0]) != self._seen + 1
        held.add(tick, low, high, broken)
        self._seen = int(bins["number"][-1])
        middle = {
            channel.measures: channel.values(0.5 * (low[:, at].astype(np.float64) + high[:, at]))
            for at, (_, channel) in enumerate(self._used)
            if channel.measures in (BODY, CRANK)
        }
        if CRANK in middle:
            nothing = np.full(len(tick), np.nan)
            self._means.add(tick / reader.tick_hz, middle.get(BODY, nothing), middle[CRANK], broken)

    def _learn_pace(self, reader: RingReader) -> None:
        some = reader.bins(200)["tick"].astype(np.float64)
        if len(some) > 1:
            self._bin_ticks = float(np.median(np.diff(some)))
        elif not self._bin_ticks:
            self._bin_ticks = reader.tick_hz / 1000.0


class StoredSource:
    """The rows of a session up to a position, for replay; `position_tick` may be set by hand, too.

    Read in stretches with some seconds ahead, from the overview where that is fine enough, else from the rows.
    """

    def __init__(self, stream: Stream, rig: RigDescription | None = None) -> None:
        self.state = "stored"
        self.stops_deg = None if rig is None else _stops(rig)
        self.signals = signals_of(stream.channels)
        self.position_tick = stream.first_tick
        self._stream = stream
        self._held: tuple[tuple[float, int], float, float] | None = None  # asked for, from s, to s
        self._by: dict[str, Trace] = {}
        self._mean: Trace | None = None

    def follow(self, model: RunModel) -> None:
        if model.tick:
            self.position_tick = model.tick

    def latest(self, span_s: float, columns: int = COLUMNS) -> Traces | None:
        stream = self._stream
        now_s = (self.position_tick - stream.first_tick) / stream.tick_hz
        from_s = now_s - span_s
        if not len(stream) or now_s <= 0.0:
            return None
        held = self._held
        if held is None or held[0] != (span_s, columns) or not held[1] <= from_s or not now_s <= held[2]:
            self._read(span_s, columns, from_s, now_s)
        by = {measures: cut(trace, from_s, now_s) for measures, trace in self._by.items()}
        mean = None if self._mean is None else cut(self._mean, from_s, now_s)
        return Traces(by, mean, now_s, self.position_tick)

    def recent(self, span_s: float) -> Recent | None:
        stream = self._stream
        crank = stream.channels.measuring(CRANK)
        now_s = (self.position_tick - stream.first_tick) / stream.tick_hz
        if crank is None or now_s <= 0.0:
            return None
        ends = self.position_tick - int(span_s * stream.tick_hz), self.position_tick
        time_s, crank_rad, _ = self._rows(stream.channels[crank], *ends)
        by: dict[str, Trace] = {}
        for channel in stream.channels:
            when, low, high = self._rows(channel, *ends)
            trace = trace_of(channel, when, low, high, np.zeros(len(when), bool))
            if trace is not None:
                by.setdefault(channel.measures, trace)
        return Recent(time_s, crank_rad, by) if len(time_s) else None

    def _rows(self, channel: Channel, first_tick: int, end_tick: int) -> tuple[Values, Values, Values]:
        rows = max(1, (end_tick - first_tick) // self._stream.row_period_ticks + 1)
        return self._stream.overview(channel.name, first_tick, end_tick, rows)

    def _read(self, span_s: float, columns: int, from_s: float, now_s: float) -> None:
        stream, hz = self._stream, self._stream.tick_hz
        step_s = max(span_s / columns, stream.row_period_ticks / hz)
        # No more bins are asked for than there can be, or the rows themselves would be read.
        to_s = max(now_s, min(now_s + max(AHEAD_S, span_s), stream.duration_s))
        first = stream.first_tick + int(max(from_s, 0.0) * hz)
        end = stream.first_tick + int(to_s * hz)
        self._by, self._mean = {}, None
        for channel in stream.channels:
            if channel.measures not in UNITS or channel.measures in self._by:
                continue
            bins = max(1, int((to_s - max(from_s, 0.0)) / step_s))
            time_s, low, high = stream.overview(channel.name, first, end, bins)
            middle_s, low, high, starts = columns_of(time_s, low, high, step_s)
            broken = np.zeros(len(middle_s), bool)
            broken[self._columns_after_losses(time_s[starts])] = True
            trace = trace_of(channel, middle_s, low, high, broken)
            if trace is not None:
                self._by[channel.measures] = trace
        self._read_turns(first, end)
        self._held = ((span_s, columns), from_s, to_s)

    def _read_turns(self, first_tick: int, end_tick: int) -> None:
        channels = self._stream.channels
        body, crank = channels.measuring(BODY), channels.measuring(CRANK)
        if crank is None:
            return
        bins = max(1, int(FINE_PER_S * (end_tick - first_tick) / self._stream.tick_hz))
        time_s, low, high = self._stream.overview(channels[crank].name, first_tick, end_tick, bins)
        crank_rad, angle = 0.5 * (low + high), np.full(len(time_s), np.nan)
        if body is not None:
            _, low, high = self._stream.overview(channels[body].name, first_tick, end_tick, bins)
            angle = 0.5 * (low + high)
        broken = np.zeros(len(time_s), bool)
        broken[self._columns_after_losses(time_s)] = True
        turns = TurnMeans()
        turns.add(time_s, angle, crank_rad, broken)
        self._mean = add_turns(self._by, turns, 0.0)

    def _columns_after_losses(self, first_s: Values) -> NDArray[np.intp]:
        """Places of the columns, told by their first rows, in which rows come back after a loss."""
        stream = self._stream
        back_s = [(loss[0] - stream.first_tick) / stream.tick_hz for loss in stream.losses if loss[1]]
        if not len(first_s):
            return np.empty(0, np.intp)
        at = np.searchsorted(first_s, np.array(back_s, dtype=float) + 1e-9, side="right") - 1
        return at[(at > 0) & (np.array(back_s) <= first_s[-1])]


def _stops(rig: RigDescription) -> tuple[float, float]:
    return float(np.degrees(rig.stops.low_rad)), float(np.degrees(rig.stops.high_rad))
