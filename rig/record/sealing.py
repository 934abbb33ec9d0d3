"""From journal to session file: an HDF5 file that any program reads.

    /                      attributes haltere_format, created_utc, software
    /streams/board/tick    uint64, board ticks, unwrapped
    /streams/board/time_s  float64, board time since the first row
    /streams/board/NAME    int32 raw values; attributes unit, scale, offset, calibration, measures, delay_s,
                           low_raw, high_raw: value = raw * scale + offset
    /streams/board/status  uint16, `drivers.rows.Status` bits
                           (the group's attributes: tick_hz, row_period_ticks, frame_rows)
    /overview/board/NAME/ROWS   int32, (bins, 2): smallest and largest raw value of every ROWS rows
                           (16, 256, 4096 ...; `rig.record.overview`), for drawing
    /events/tick, kind, data      one entry an event; data is JSON text
    /losses/tick, rows, frames, overruns   lost before the row at that tick
    /samplers/NAME/...            rows of text samplers, see rig.record.sampler_rows
    /results/live          JSON list of all verdicts in the order they were told (`rig.verdicts`)
    /results/final         JSON of the results (`rig.results`), null if the run was cut off; its attribute
                           software: what worked it out
    /rig, /protocol, /header      texts as they were when the run began
    /calibrations/NAME            texts
    /recovered                    JSON text, only where the journal was not whole: what is missing, and why
                           (`rig.record.recovery`)
    /digests               JSON text, SHA-256 of each dataset and of all attributes (`rig.record.digests`)

It is written under another name in the same folder, synced, read back and compared, and then given its name:
there is never half a session file. The journal is deleted only after that, and only if asked.

The file is laid out as since HDF5 1.10, whose headers carry checksums: a flipped bit in a scale or an offset is
found, where the older layout would hand it out as it is.
"""

from __future__ import annotations

import contextlib
import json
import os
from pathlib import Path

import h5py
import numpy as np

from rig.events import Event
from rig.record import digests, overview, recovery, sampler_rows
from rig.record.durability import lock, sync_folder
from rig.record.errors import JournalFailure, NameTaken
from rig.record.recording import Recording, read_recording
from rig.record.refusals import refusal
from rig.record.target import new_session

FORMAT = 1
#: What of a channel stands beside its column.
CHANNEL_ATTRIBUTES = (
    "unit", "scale", "offset", "calibration", "measures", "delay_s", "low_raw", "high_raw"
)  # fmt: skip


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
        with new_session(aside) as file:
            wanted = _fill(file, recording)
        descriptor = os.open(aside, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
        _compare(aside, wanted)
        _name(aside, session)
        sync_folder(session.absolute().parent)
    except FileExistsError:
        raise NameTaken(f"{session} is there already") from None
    except (OSError, RuntimeError, ValueError) as error:  # h5py tells a full disk as one of the first two
        raise JournalFailure(f"{session} cannot be written: {refusal(error, session)}") from error
    finally:
        with contextlib.suppress(OSError):  # of a folder that is none
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


def _fill(file: h5py.File, recording: Recording) -> digests.DigestingFile:
    header = recording.header
    book = digests.DigestingFile(file)
    book.attribute_set(
        "/",
        {
            "haltere_format": FORMAT,
            "created_utc": str(header.get("created_utc", "")),
            "software": str(header.get("software", "")),
        },
    )
    _fill_board(file, book, recording)
    _fill_samplers(book, recording)
    events = recording.events
    book.numbers("/events/tick", np.array([event.tick for event in events], dtype=np.uint64))
    book.texts("/events/kind", [event.kind for event in events])
    book.texts("/events/data", [_event_text(event) for event in events])
    for index, name in enumerate(("tick", "rows", "frames", "overruns")):
        lost = np.array([loss[index] for loss in recording.losses], dtype=np.uint64)
        book.numbers(f"/losses/{name}", lost)
    book.text("/results/live", json.dumps(recording.live))
    book.text("/results/final", json.dumps(recording.final))
    book.attribute_set("/results/final", {"software": str(header.get("software", ""))})
    for name in ("rig", "protocol"):
        book.text(f"/{name}", str(header.get(f"{name}_text", "")))
    book.text("/header", json.dumps(header, default=str))
    if recording.recovery is not None:
        book.text(recovery.PLACE, json.dumps(recording.recovery.to_json()))
    file.create_group("calibrations")
    for name, text in dict(header.get("calibrations", {})).items():
        book.text(f"/calibrations/{name}", str(text))
    book.finish()
    return book


def _fill_board(file: h5py.File, book: digests.DigestingFile, recording: Recording) -> None:
    header, pieces, shape = recording.header, recording.pieces, (len(recording),)
    place, tick_hz = "/streams/board", int(header["tick_hz"])
    book.group(
        place,
        {
            "tick_hz": tick_hz,
            "row_period_ticks": int(header.get("row_period_ticks", 0)),
            "frame_rows": int(header.get("frame_rows", 0)),
        },
    )
    first = pieces[0].tick[0] if pieces else np.uint64(0)
    since = ((piece.tick - first).astype(np.float64) / tick_hz for piece in pieces)
    book.column(f"{place}/tick", shape, "u8", (piece.tick for piece in pieces))
    book.column(f"{place}/time_s", shape, "f8", since)
    book.column(f"{place}/status", shape, "u2", (piece.status for piece in pieces))
    for index, channel in enumerate(recording.channels):
        name = f"{place}/{channel.name}"
        book.column(name, shape, "i4", recording.column(index))
        told = {attribute: getattr(channel, attribute) for attribute in CHANNEL_ATTRIBUTES}
        numbers = {attribute: float(told[attribute]) for attribute in ("scale", "offset", "delay_s")}
        book.attribute_set(name, {**told, **numbers, "column": index})
        for rows_per_bin, bins in overview.pyramid(recording.column(index), len(recording)).items():
            book.column(f"/overview/board/{channel.name}/{rows_per_bin}", bins.shape, "i4", [bins])


def _fill_samplers(book: digests.DigestingFile, recording: Recording) -> None:
    first = int(recording.pieces[0].tick[0]) if recording.pieces else 0
    described = recording.header.get("samplers")
    listed = described if isinstance(described, list) else []
    told = {str(one.get("name")): one for one in listed if isinstance(one, dict)}
    for name, rows in recording.samplers.items():
        place, tick_hz = f"/samplers/{name}", int(recording.header["tick_hz"])
        sampler_rows.fill(book, place, rows, told.get(name, {}), first, tick_hz)


def _event_text(event: Event) -> str:
    return json.dumps(event.data, default=str)


def _compare(path: Path, wanted: digests.DigestingFile) -> None:
    """What stands in the file must be what was in the journal, all of it."""
    with h5py.File(path, "r") as file:
        found = digests.of_file(file)
    if found != {"datasets": wanted.datasets, "attributes": wanted.attributes}:
        raise OSError(None, "what was read back differs from what was written")
