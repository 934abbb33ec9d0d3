"""From journal to session file: an HDF5 file that any program reads.

    /                      attributes haltere_format, created_utc, software
    /streams/board/tick    uint64, board ticks, unwrapped
    /streams/board/time_s  float64, board time since the first row
    /streams/board/NAME    int32 raw values; attributes unit, scale, offset, calibration, measures, delay_s,
                           low_raw, high_raw: value = raw * scale + offset
    /streams/board/status  uint16, `drivers.rows.Status` bits
                           (the group's attributes: tick_hz, row_period_ticks, frame_rows)
    /events/tick, kind, data      one entry an event; data is JSON text
    /losses/tick, rows, frames, overruns   lost before the row at that tick
    /results/live, /results/final          JSON texts
    /rig, /protocol, /header      texts as they were when the run began
    /calibrations/NAME            texts

It is written under another name in the same folder, synced, read back and compared, and then given its name:
there is never half a session file. The journal is deleted only after that, and only if asked.

The file is laid out as since HDF5 1.10, whose headers carry checksums: a flipped bit in a scale or an offset is
found, where the older layout would hand it out as it is.
"""

from __future__ import annotations

import json
import math
import os
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from drivers.channels import Channel, ChannelTable
from drivers.rows import FrameDamaged, FrameSequence, RowBlock, RowFrame
from rig.events import Event
from rig.record import journal as jn
from rig.record.durability import lock, sync_folder
from rig.record.errors import Damaged, JournalFailure, NameTaken

FORMAT = 1
CHUNK_ROWS = 16384
#: Columns every stream has, so that no channel can be called so.
COLUMNS = ("tick", "time_s", "status")
TEXT = h5py.string_dtype("utf-8")


@dataclass
class Recording:
    """A journal in memory: rows, events, losses and results."""

    header: dict[str, Any]
    channels: ChannelTable
    blocks: list[RowBlock] = field(default_factory=list)
    events: list[Event] = field(default_factory=list)
    losses: list[tuple[int, int, int, int]] = field(default_factory=list)  # tick, rows, frames, overruns
    live: list[dict[str, Any]] = field(default_factory=list)
    final: dict[str, Any] | None = None
    ended: bool = False
    damage: str = ""

    @property
    def tick(self) -> NDArray[np.uint64]:
        return np.concatenate([block.tick for block in self.blocks] or [np.empty(0, dtype=np.uint64)])

    @property
    def raw(self) -> NDArray[np.int32]:
        empty = np.empty((0, len(self.channels)), dtype=np.int32)
        return np.concatenate([block.raw for block in self.blocks] or [empty])

    @property
    def status(self) -> NDArray[np.uint16]:
        parts = [np.full(len(block), block.status, dtype=np.uint16) for block in self.blocks]
        return np.concatenate(parts or [np.empty(0, dtype=np.uint16)])


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
            new_overruns = (block.overruns - overruns) & 0xFFFF if recording.blocks else 0
            overruns = block.overruns
            if block.lost_rows or block.lost_frames or new_overruns:
                loss = (int(block.tick[0]), block.lost_rows, block.lost_frames, new_overruns)
                recording.losses.append(loss)
            recording.blocks.append(block)
        elif record.kind == jn.EVENT:
            try:
                event = Event.from_json(record.fields())
                if not 0 <= event.tick < 2**64:
                    raise ValueError("no tick")
                recording.events.append(event)
            except (ValueError, KeyError, TypeError, OverflowError):
                recording.damage = f"an event that is none (record {record.sequence})"
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
            and all(isinstance(number, int | float) and math.isfinite(number) for number in numbers)
            and all(isinstance(number, int) and abs(number) <= 2**31 for number in whole)
        ):
            return f"describes channel {name!r} in a way that cannot be read"
    if not isinstance(header.get("calibrations", {}), dict):
        return "has no readable calibrations"
    return ""


def seal(journal: Path, session: Path, *, keep_journal: bool = False) -> Recording:
    """Write the session file of a journal and read it back; returns what was sealed.

    Raises NameTaken if `session` exists or the journal is in use, Damaged if the journal has no readable
    header, JournalFailure if the session cannot be written. Whatever happens, the journal stays until the
    session has been verified.
    """
    if session.exists():
        raise NameTaken(f"{session} is there already")
    with journal.open("rb") as file:
        if not lock(file.fileno()):
            raise NameTaken(f"{journal} is still being written by a run, or sealed by another command")
        recording = read_recording(journal)
        write_session(recording, session)
    if not keep_journal:
        journal.unlink()
        sync_folder(journal.absolute().parent)
    return recording


def write_session(recording: Recording, session: Path) -> None:
    """Write, sync, compare, then name."""
    # One name for all attempts: what a killed one leaves behind is overwritten by the next.
    aside = session.with_name(f".{session.name}.part")
    try:
        with h5py.File(aside, "w", libver=("v110", "v110")) as file:
            _fill(file, recording)
        descriptor = os.open(aside, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
        _compare(aside, recording)
        _name(aside, session)
        sync_folder(session.absolute().parent)
    except FileExistsError:
        raise NameTaken(f"{session} is there already") from None
    except (OSError, RuntimeError, ValueError) as error:  # h5py tells a full disk as one of the first two
        words = error.strerror if isinstance(error, OSError) and error.strerror else str(error).split("(")[0]
        raise JournalFailure(f"{session} cannot be written: {words.strip()}") from error
    finally:
        aside.unlink(missing_ok=True)


def _name(aside: Path, session: Path) -> None:
    """Give the finished file its name without ever replacing another."""
    try:
        os.link(aside, session)  # fails if the name is taken, where a rename would overwrite
    except FileExistsError:
        raise
    except OSError:  # a file system without links
        if session.exists():
            raise FileExistsError(session) from None
        aside.rename(session)


def _fill(file: h5py.File, recording: Recording) -> None:
    header = recording.header
    file.attrs["haltere_format"] = FORMAT
    file.attrs["created_utc"] = str(header.get("created_utc", ""))
    file.attrs["software"] = str(header.get("software", ""))
    board = file.create_group("streams/board")
    tick_hz = int(header["tick_hz"])
    board.attrs["tick_hz"] = tick_hz
    board.attrs["row_period_ticks"] = int(header.get("row_period_ticks", 0))
    board.attrs["frame_rows"] = int(header.get("frame_rows", 0))
    tick, raw = recording.tick, recording.raw
    _column(board, "tick", tick)
    since = (tick - tick[0]).astype(np.float64) / tick_hz if len(tick) else np.empty(0)
    _column(board, "time_s", since)
    _column(board, "status", recording.status)
    for index, channel in enumerate(recording.channels):
        data = _column(board, channel.name, raw[:, index])
        for name in ("unit", "scale", "offset", "calibration", "measures", "delay_s", "low_raw", "high_raw"):
            data.attrs[name] = getattr(channel, name)
        data.attrs["column"] = index
    events = file.create_group("events")
    events["tick"] = np.array([event.tick for event in recording.events], dtype=np.uint64)
    _texts(events, "kind", [event.kind for event in recording.events])
    _texts(events, "data", [_event_text(event) for event in recording.events])
    losses = file.create_group("losses")
    for index, name in enumerate(("tick", "rows", "frames", "overruns")):
        losses[name] = np.array([loss[index] for loss in recording.losses], dtype=np.uint64)
    results = file.create_group("results")
    results.create_dataset("live", data=json.dumps(recording.live), dtype=TEXT)
    results.create_dataset("final", data=json.dumps(recording.final), dtype=TEXT)
    for name in ("rig", "protocol"):
        file.create_dataset(name, data=str(header.get(f"{name}_text", "")), dtype=TEXT)
    file.create_dataset("header", data=json.dumps(header, default=str), dtype=TEXT)
    calibrations = file.create_group("calibrations")
    for name, text in dict(header.get("calibrations", {})).items():
        calibrations.create_dataset(name, data=str(text), dtype=TEXT)


def _column(group: h5py.Group, name: str, data: NDArray[Any]) -> h5py.Dataset:
    chunk = (max(1, min(CHUNK_ROWS, len(data))),)
    return group.create_dataset(
        name, data=data, chunks=chunk, maxshape=(None,), shuffle=True, compression="gzip", compression_opts=1
    )


def _texts(group: h5py.Group, name: str, texts: list[str]) -> None:
    group.create_dataset(name, shape=(len(texts),), data=np.array(texts, dtype=object), dtype=TEXT)


def _event_text(event: Event) -> str:
    return json.dumps(event.data, default=str)


def _compare(path: Path, recording: Recording) -> None:
    """What stands in the file must be what was in the journal."""
    with h5py.File(path, "r") as file:
        board = file["streams/board"]
        raw = recording.raw
        same = (
            np.array_equal(board["tick"][:], recording.tick)
            and np.array_equal(board["status"][:], recording.status)
            and all(
                np.array_equal(board[channel.name][:], raw[:, index])
                for index, channel in enumerate(recording.channels)
            )
        )
        names = ("tick", "kind", "data")
        events = list(zip(*(file[f"events/{name}"][:] for name in names), strict=True))
        wanted = [
            (event.tick, event.kind.encode(), _event_text(event).encode()) for event in recording.events
        ]
        if not same or events != wanted:
            raise OSError(None, "what was read back differs from what was written")
