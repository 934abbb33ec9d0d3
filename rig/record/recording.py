"""A journal in memory: its rows merged into large arrays, its events, losses and results."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from drivers.channels import Channel, ChannelTable
from drivers.rows import FrameDamaged, RowFrame
from rig.events import Event, unreadable
from rig.record import journal as jn
from rig.record.errors import Damaged
from rig.record.pieces import Merger, Piece
from rig.record.placement import Placement
from rig.record.recovery import Recovery, Unread
from rig.record.sampler_rows import SamplerRows
from rig.record.samples import Samples

#: Columns every stream has, so that no channel can be called so.
COLUMNS = ("tick", "time_s", "status")


@dataclass
class Recording:
    """What of a journal is intact."""

    header: dict[str, Any]
    channels: ChannelTable
    pieces: list[Piece] = field(default_factory=list)
    frames: int = 0
    events: list[Event] = field(default_factory=list)
    losses: list[tuple[int, int, int, int]] = field(default_factory=list)  # tick, rows, frames, overruns
    live: list[dict[str, Any]] = field(default_factory=list)
    final: dict[str, Any] | None = None
    samplers: dict[str, SamplerRows] = field(default_factory=dict)
    ended: bool = False
    unread: list[Unread] = field(default_factory=list)
    rows_behind: int = 0  # a damage
    results_left_out: int = 0

    @property
    def damage(self) -> str:
        """What is wrong first, "" if nothing is."""
        return self.unread[0].what if self.unread else ""

    @property
    def recovery(self) -> Recovery | None:
        """What a session sealed from this says of itself; None if the journal was whole."""
        if self.ended and not self.unread:
            return None
        return Recovery(self.ended, tuple(self.unread), self.rows_behind, self.results_left_out)

    def __len__(self) -> int:
        """Rows."""
        return sum(len(piece) for piece in self.pieces)

    @property
    def tick(self) -> NDArray[np.uint64]:
        """All ticks in one array, shape (n,); a copy."""
        return np.concatenate([piece.tick for piece in self.pieces] or [np.empty(0, dtype=np.uint64)])

    @property
    def raw(self) -> NDArray[np.int32]:
        """All raw values in one array, shape (n, channels); a copy."""
        empty = np.empty((0, len(self.channels)), dtype=np.int32)
        return np.concatenate([piece.raw for piece in self.pieces] or [empty])

    @property
    def status(self) -> NDArray[np.uint16]:
        """The status of every row, shape (n,); a copy."""
        return np.concatenate([piece.status for piece in self.pieces] or [np.empty(0, dtype=np.uint16)])

    def column(self, index: int) -> Iterator[NDArray[np.int32]]:
        """Raw values of one channel, piece by piece."""
        for piece in self.pieces:
            yield np.ascontiguousarray(piece.raw[:, index])


def read_recording(path: Path) -> Recording:
    """All of a journal that is intact. Raises Damaged if its header is not readable."""
    book = jn.Journal(path)
    try:
        channels = ChannelTable(tuple(Channel(**fields) for fields in book.header["channels"]))
    except (KeyError, TypeError, ValueError) as error:
        raise Damaged(f"{path}: the journal's header has no readable channel table") from error
    if wrong := _wrong_header(book.header, channels):
        raise Damaged(f"{path}: the journal's header {wrong}")
    recording = Recording(book.header, channels)
    _Reading(recording).go_through(book)
    return recording


class _Nonsense(ValueError):
    """A record with a right check sum and a content no run writes, or one that does not continue what was before."""


class _Reading:
    """Goes through a journal once. What stands behind a damage waits until a row frame shows that it fits."""

    def __init__(self, recording: Recording) -> None:
        self._into = recording
        self._placement = Placement()
        self._merger = Merger()
        self._overruns = 0
        self._block_tick: int | None = None  # of the first row of the last block
        self._waiting: list[jn.Gap | jn.Record] = []
        self._rows_due = False  # a gap was taken, no rows have come behind it yet
        self._untold: list[jn.Gap] = []  # taken, no row or event has come behind them yet
        self._missing = False  # whether records are missing, so far
        self._at = 0  # where the record stands that is being taken

    def go_through(self, book: jn.Journal) -> None:
        known = 0
        # Closed here, not by the garbage collector: reading may end before the file does.
        with contextlib.closing(book.records()) as records:
            try:
                for record in records:
                    self._waiting += book.gaps[known:]
                    known = len(book.gaps)
                    if not self._waiting:
                        self._take(record)
                        continue
                    self._waiting.append(record)
                    if record.kind == jn.FRAME:
                        self._settle(record)
                self._settle()
            except _Nonsense as error:
                self._end(f"{error} at byte {self._at}", book.size)
            else:
                self._into.ended = book.ended
                for gap in book.gaps[known:]:
                    unread = Unread(
                        gap.what, gap.start, gap.end, gap.harmless, torn=gap.torn, from_tick=self._block_tick
                    )
                    self._into.unread.append(unread)
        self._into.pieces = self._merger.finish()

    def _end(self, what: str, size: int) -> None:
        """Nothing is taken from here on, nor what waited."""
        place = self._at
        for one in self._waiting:
            if isinstance(one, jn.Gap):
                what, place = f"{one.what}, and {what}", one.start
                break
        self._into.unread.append(Unread(what, place, size, from_tick=self._block_tick))

    def _settle(self, frame: jn.Record | None = None) -> None:
        """Take what waited, if the row frame at its end (if there is one) continues the rows before."""
        if frame is not None:
            self._at = frame.start
            if not self._placement.fits(_row_frame(frame)):
                raise _Nonsense("rows that do not continue those before it")
        waiting, self._waiting = self._waiting, []
        for one in waiting:
            if isinstance(one, jn.Record):
                self._take(one)
                continue
            unread = Unread(one.what, one.start, one.end, records=one.records, from_tick=self._block_tick)
            self._into.unread.append(unread)
            self._rows_due = True
            if one.records:
                self._untold.append(one)
                self._missing = True

    def _take(self, record: jn.Record) -> None:
        into = self._into
        self._at = record.start
        if record.kind == jn.FRAME:
            self._take_frame(_row_frame(record))
        elif record.kind == jn.EVENT:
            try:
                event = Event.from_json(record.fields())
                if not 0 <= event.tick < 2**64 or unreadable(event):
                    raise ValueError("no tick, or no session could be opened with it")
            except (ValueError, KeyError, TypeError, OverflowError):
                raise _Nonsense("an event that is none, in the record") from None
            self._tell_gaps(event.tick, self._placement.last_tick)
            into.events.append(event)
        elif record.kind == jn.SAMPLES:
            try:
                samples = Samples.from_json(record.fields())
                if not samples.sampler.isidentifier():
                    raise ValueError("no name of a sampler")
                into.samplers.setdefault(samples.sampler, SamplerRows()).add(samples)
            except ValueError:
                raise _Nonsense("rows of a sampler that are none, in the record") from None
        elif record.kind == jn.RESULT:
            try:
                fields = record.fields()
            except ValueError:
                raise _Nonsense("a result that is none, in the record") from None
            if self._missing:
                # Worked out from what is missing now: nobody could come to the same again.
                into.results_left_out += 1
            elif fields.pop("which", "live") == "final":
                into.final = fields
            else:
                into.live.append(fields)

    def _take_frame(self, frame: RowFrame) -> None:
        into = self._into
        if frame.raw.shape[1] != len(into.channels):
            raise _Nonsense(f"a row frame with {frame.raw.shape[1]} channels, in the record")
        near_tick = into.events[-1].tick if into.events else None
        before = self._placement.last_tick
        try:
            block = self._placement.place(frame, self._rows_due, near_tick)
        except FrameDamaged as error:
            raise _Nonsense(f"{error}, in the record") from None
        first = int(block.tick[0])
        new_overruns = (block.overruns - self._overruns) & 0xFFFF if into.frames else 0
        self._overruns = block.overruns
        if block.lost_rows or block.lost_frames or new_overruns:
            into.losses.append((first, block.lost_rows, block.lost_frames, new_overruns))
        if self._rows_due:
            # Of several gaps without a row between them the last one tells the rows of all.
            told = replace(into.unread[-1], rows=block.lost_rows, frames=block.lost_frames, to_tick=first)
            into.unread[-1] = told
            self._rows_due = False
        if into.unread:
            into.rows_behind += len(block)
        self._tell_gaps(first, before)
        self._block_tick = first
        into.frames += 1
        self._merger.add(block)

    def _tell_gaps(self, next_tick: int, last_tick: int | None) -> None:
        """An event for each gap: what is behind it may belong to something else than what is before it."""
        events = self._into.events
        ticks = [event.tick for event in events[-1:]]
        if last_tick is not None:
            ticks.append(last_tick)
        for gap in self._untold:
            told = {"records": gap.records, "text": gap.what}
            events.append(Event(max(ticks, default=next_tick), "unread", told))
        self._untold = []


def _row_frame(record: jn.Record) -> RowFrame:
    try:
        return RowFrame.unpack(record.payload)
    except FrameDamaged as error:
        raise _Nonsense(f"{error}, in the record") from None


def _wrong_header(header: dict[str, Any], channels: ChannelTable) -> str:
    """Why no session can be made of a header: told before any file is written or deleted; "" if one can."""
    for name, least in (("tick_hz", 1), ("row_period_ticks", 0), ("frame_rows", 0)):
        number = header.get(name, 0)
        if not isinstance(number, int) or not least <= number < 2**53:
            return f"gives {number!r} as {name}"
    names = [channel.name for channel in channels]
    for channel in channels:
        name = channel.name
        if not isinstance(name, str) or not name.isidentifier() or name in COLUMNS or names.count(name) > 1:
            return f"has a channel called {name!r}"
        texts = (channel.unit, channel.measures, channel.calibration)
        numbers = (channel.scale, channel.offset, channel.delay_s)
        whole = (channel.low_raw, channel.high_raw)
        if not (
            all(isinstance(text, str) for text in texts)
            and all(isinstance(number, int | float) and abs(number) <= 1e300 for number in numbers)
            and all(isinstance(number, int) and abs(number) <= 2**31 for number in whole)
        ):
            return f"describes channel {name!r} in a way that cannot be read"
    if not isinstance(header.get("calibrations", {}), dict):
        return "has no readable calibrations"
    return ""
