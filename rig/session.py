"""Open a session file: streams as arrays with units, events, rig, protocol and results.

    with open_session("session.h5") as session:
        board = session.streams["board"]
        board.time_s, board["body"], board.unit("body"), board.raw("body")

Only `rig.session` and `rig.record` know HDF5.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from types import TracebackType
from typing import TYPE_CHECKING, Any

import h5py

from rig.events import Event, unreadable
from rig.record.errors import Damaged
from rig.record.inspection import inspect
from rig.record.stream import SamplerStream, Stream

if TYPE_CHECKING:
    from rig.description import RigDescription
    from rig.steps import Protocol

__all__ = ["SamplerStream", "Session", "Stream", "open_session"]


class Session:
    """A session file, open for reading; close it, or use it in a `with`."""

    def __init__(self, path: Path, file: h5py.File) -> None:
        self.path = path
        self._file = file
        self.created_utc = str(file.attrs["created_utc"])
        self.software = str(file.attrs["software"])
        columns = [file[f"losses/{name}"][:] for name in ("tick", "rows", "frames", "overruns")]
        self.losses = [tuple(int(number) for number in row) for row in zip(*columns, strict=True)]
        self.streams: Mapping[str, Stream] = {
            name: Stream(group, path, self.losses if name == "board" else ())
            for name, group in file["streams"].items()
        }
        self.samplers: Mapping[str, SamplerStream] = {
            name: SamplerStream(group, path) for name, group in file.get("samplers", {}).items()
        }
        self.rig_text = _text(file, "rig")
        self.protocol_text = _text(file, "protocol")
        self.header: dict[str, Any] = _object(_text(file, "header"), "header")
        final = json.loads(_text(file, "results/final"))
        if final is not None and not isinstance(final, dict):
            raise ValueError("results/final is not a JSON object")
        live = json.loads(_text(file, "results/live"))
        if not isinstance(live, list):
            raise ValueError("results/live is not a JSON list")
        self.results: dict[str, Any] = {"live": live, "final": final}
        #: What worked out the final results: the software of the run, unless they were worked out anew.
        self.results_software = str(file["results/final"].attrs.get("software", self.software))
        self.events: list[Event] = [
            Event(int(tick), kind.decode(), _object(data, "an event's data"))
            for tick, kind, data in zip(
                file["events/tick"][:], file["events/kind"][:], file["events/data"][:], strict=True
            )
        ]
        for event in self.events:
            if words := unreadable(event):
                raise ValueError(words)

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
        if int(file.attrs["haltere_format"]) != 1:
            raise Damaged(f"{path} is a session of a format this version does not read")
        inspect(file, place)
        return Session(place, file)
    except Damaged:
        file.close()
        raise
    except (AttributeError, TypeError, RecursionError):
        file.close()  # their words are about Python, not about the file
        raise Damaged(f"{path} is damaged: a part of it is missing or not of its kind") from None
    except (KeyError, ValueError, OSError, RuntimeError) as error:
        file.close()
        words = str(error).strip("'\"").split("\n")[0]
        raise Damaged(f"{path} is damaged: {words}") from None


def _object(text: str | bytes, what: str) -> dict[str, Any]:
    found = json.loads(text)
    if not isinstance(found, dict):
        raise ValueError(f"{what} is not a JSON object")
    return found


def _text(file: h5py.File, name: str) -> str:
    value = file[name][()]
    return value.decode() if isinstance(value, bytes) else str(value)
