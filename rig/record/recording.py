"""A journal in memory: its rows merged into large arrays, its events, losses and results."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from drivers.channels import Channel, ChannelTable
from drivers.rows import FrameDamaged, FrameSequence, RowBlock, RowFrame
from rig.events import Event, unreadable
from rig.record import journal as jn
from rig.record.errors import Damaged
from rig.record.sampler_rows import SamplerRows
from rig.record.samples import Samples

#: Columns every stream has, so that no channel can be called so.
COLUMNS = ("tick", "time_s", "status")
#: Rows of a piece: an hour of rows as blocks of one frame each would take more memory than the rows.
PIECE_ROWS = 1 << 16


@dataclass(frozen=True)
class Piece:
    """Consecutive rows: tick uint64 (n,), raw int32 (n, channels), status uint16 (n,)."""

    tick: NDArray[np.uint64]
    raw: NDArray[np.int32]
    status: NDArray[np.uint16]

    def __len__(self) -> int:
        return len(self.tick)


class Merger:
    """Joins blocks to pieces of PIECE_ROWS rows each, the last one shorter."""

    def __init__(self) -> None:
        self.pieces: list[Piece] = []
        self._waiting: list[RowBlock] = []
        self._rows = 0

    def add(self, block: RowBlock) -> None:
        self._waiting.append(block)
        self._rows += len(block)
        if self._rows >= PIECE_ROWS:
            self._join()

    def finish(self) -> list[Piece]:
        """All pieces; nothing may be added after."""
        if self._waiting:
            self._join()
        return self.pieces

    def _join(self) -> None:
        blocks, self._waiting = self._waiting, []
        lengths = [len(block) for block in blocks]
        status = np.repeat(np.array([block.status for block in blocks], dtype=np.uint16), lengths)
        tick = np.concatenate([block.tick for block in blocks])
        raw = np.concatenate([block.raw for block in blocks])
        # Copies: a view would keep the longer array alive.
        part = slice(0, PIECE_ROWS)
        self.pieces.append(Piece(tick[part].copy(), raw[part].copy(), status[part].copy()))
        self._rows = max(0, len(tick) - PIECE_ROWS)
        if self._rows:
            last = blocks[-1]  # only the last block can reach beyond, as pieces are joined once they are full
            rest = slice(len(last) - self._rows, len(last))
            self._waiting = [RowBlock(last.tick[rest].copy(), last.raw[rest].copy(), status=last.status)]


@dataclass
class Recording:
    """What a journal holds, up to the first damage."""

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
    damage: str = ""

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
    """The intact part of a journal. Raises Damaged if its header is not readable."""
    book = jn.Journal(path)
    try:
        channels = ChannelTable(tuple(Channel(**fields) for fields in book.header["channels"]))
    except (KeyError, TypeError, ValueError) as error:
        raise Damaged(f"{path}: the journal's header has no readable channel table") from error
    if wrong := _wrong_header(book.header, channels):
        raise Damaged(f"{path}: the journal's header {wrong}")
    recording = Recording(book.header, channels)
    sequence = FrameSequence()
    merger = Merger()
    overruns = 0
    for record in book:
        if record.kind == jn.FRAME:
            try:
                block = sequence.place(RowFrame.unpack(record.payload))
            except FrameDamaged as error:
                recording.damage = f"{error} (record {record.sequence})"
                break
            if block.raw.shape[1] != len(channels):
                recording.damage = (
                    f"a row frame with {block.raw.shape[1]} channels (record {record.sequence})"
                )
                break
            new_overruns = (block.overruns - overruns) & 0xFFFF if recording.frames else 0
            overruns = block.overruns
            if block.lost_rows or block.lost_frames or new_overruns:
                loss = (int(block.tick[0]), block.lost_rows, block.lost_frames, new_overruns)
                recording.losses.append(loss)
            recording.frames += 1
            merger.add(block)
        elif record.kind == jn.EVENT:
            try:
                event = Event.from_json(record.fields())
                if not 0 <= event.tick < 2**64 or unreadable(event):
                    raise ValueError("no tick, or no session could be opened with it")
                recording.events.append(event)
            except (ValueError, KeyError, TypeError, OverflowError):
                recording.damage = f"an event that is none (record {record.sequence})"
                break
        elif record.kind == jn.SAMPLES:
            try:
                samples = Samples.from_json(record.fields())
                if not samples.sampler.isidentifier():
                    raise ValueError("no name of a sampler")
                recording.samplers.setdefault(samples.sampler, SamplerRows()).add(samples)
            except ValueError:
                recording.damage = f"rows of a sampler that are none (record {record.sequence})"
                break
        elif record.kind == jn.RESULT:
            try:
                fields = record.fields()
            except ValueError:
                recording.damage = f"a result that is none (record {record.sequence})"
                break
            if fields.pop("which", "live") == "final":
                recording.final = fields
            else:
                recording.live.append(fields)
    recording.pieces = merger.finish()
    recording.ended = book.ended
    recording.damage = recording.damage or book.damage
    return recording


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
