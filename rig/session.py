"""Open a session file: streams as arrays with units, events, rig, protocol and results.

    with open_session("session.h5") as session:
        board = session.streams["board"]
        board.time_s, board["body"], board.unit("body"), board.raw("body")

Only `rig.session` and `rig.record` know HDF5.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from types import TracebackType
from typing import TYPE_CHECKING, Any

import h5py

from rig.events import Event, unreadable
from rig.record import recovery
from rig.record.errors import Damaged
from rig.record.inspection import inspect
from rig.record.parts import Parts, damaged, text_attribute, whole_attribute
from rig.record.recovery import Recovery
from rig.record.stream import SamplerStream, Stream

if TYPE_CHECKING:
    from rig.description import RigDescription
    from rig.steps import Protocol

LOSS_COLUMNS = ("tick", "rows", "frames", "overruns")

__all__ = ["SamplerStream", "Session", "Stream", "open_session"]


class Session:
    """A session file, open for reading; close it, or use it in a `with`."""

    def __init__(self, path: Path, file: h5py.File) -> None:
        self.path = path
        self._file = file
        parts = Parts(file, path)
        self.created_utc = text_attribute(file, "created_utc", path)
        self.software = text_attribute(file, "software", path)
        self.losses = _losses(parts)
        self.streams: Mapping[str, Stream] = {
            name: Stream(parts.group(f"/streams/{name}"), path, self.losses if name == "board" else ())
            for name in parts.group("/streams")
        }
        self.samplers: Mapping[str, SamplerStream] = {
            name: SamplerStream(group, path) for name, group in file.get("samplers", {}).items()
        }
        self.rig_text = parts.text("/rig")
        self.protocol_text = parts.text("/protocol")
        self.header: dict[str, Any] = parts.json_object("/header")
        final = parts.json("/results/final")
        if final is not None and not isinstance(final, dict):
            raise damaged(path, "/results/final", "a JSON object or null")
        live = parts.json("/results/live")
        if not isinstance(live, list):
            raise damaged(path, "/results/live", "a JSON list")
        self.results: dict[str, Any] = {"live": live, "final": final}
        #: What worked out the final results: the software of the run, unless they were worked out anew.
        self.results_software = str(file["results/final"].attrs.get("software", self.software))
        self.events = _events(parts)
        #: How its journal was found, None if that was whole.
        self.recovered = _recovered(parts) if recovery.PLACE in file else None

    @property
    def rig(self) -> RigDescription:
        """The rig as described when the run began; FileProblems if this version cannot read it."""
        from rig.files.rig import rig_from_text

        return rig_from_text(self.rig_text, f"{self.path}:/rig")

    @property
    def protocol(self) -> Protocol:
        """The protocol as it was when the run began."""
        from rig.files.protocol import protocol_from_text

        return protocol_from_text(self.protocol_text, f"{self.path}:/protocol")

    def close(self) -> None:
        self._file.close()

    def __enter__(self) -> Session:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()


def open_session(path: str | Path) -> Session:
    """Open a session file.

    FileNotFoundError if there is none; Damaged, in one sentence, if it is no session file, has links out of
    itself, columns of absurd size, or parts missing or of the wrong type.
    """
    place = Path(path)
    if not place.is_file():
        raise FileNotFoundError(2, "no such session file", str(path))
    try:
        file = h5py.File(place, "r")
    except OSError:
        raise Damaged(f"{path} is not an HDF5 file, or a damaged one") from None
    try:
        if "haltere_format" not in file.attrs:
            raise Damaged(f"{path} is not a Haltere session")
        if whole_attribute(file, "haltere_format", place) != 1:
            raise Damaged(f"{path} is a session of a format this version does not read")
        inspect(file, place)
        return Session(place, file)
    except Damaged:
        file.close()
        raise
    except (AttributeError, KeyError, OSError, RecursionError, RuntimeError, TypeError, ValueError):
        file.close()  # their words are about Python or HDF5, not about the file
        raise Damaged(f"{path} is damaged: a part of it is missing or not of its kind") from None


def _losses(parts: Parts) -> list[tuple[int, ...]]:
    columns = {f"/losses/{name}": parts.whole(f"/losses/{name}") for name in LOSS_COLUMNS}
    parts.same_length(columns)
    return list(zip(*columns.values(), strict=True))


def _events(parts: Parts) -> list[Event]:
    ticks, kinds, texts = (
        parts.whole("/events/tick"),
        parts.texts("/events/kind"),
        parts.texts("/events/data"),
    )
    parts.same_length({"/events/tick": ticks, "/events/kind": kinds, "/events/data": texts})
    events = []
    for row, (tick, kind, text) in enumerate(zip(ticks, kinds, texts, strict=True)):
        event = Event(tick, kind, parts.object_of(text, "/events/data", row))
        if words := unreadable(event):
            raise damaged(parts.path, "/events/data", f"what the analysis can read, {words}", row)
        events.append(event)
    return events


def _recovered(parts: Parts) -> Recovery:
    try:
        return Recovery.from_json(parts.json_object(recovery.PLACE))
    except ValueError:
        raise damaged(parts.path, recovery.PLACE, "an account of a recovery") from None
