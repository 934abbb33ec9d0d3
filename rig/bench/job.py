"""What a bench process is asked to do: one run, as plain data that fits into a line of JSON."""

from __future__ import annotations

from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any

from rig.description import RigDescription
from rig.files.protocol import protocol_from_text
from rig.files.rig import rig_from_text
from rig.steps import Protocol


@dataclass(frozen=True)
class Job:
    """One run. Texts travel instead of paths: a file edited meanwhile changes nothing.

    `port` sends a rig to a board at that address whatever its file says ("": as the file says). Times of the
    wall clock come from the client, so that the bench process needs none of its own.
    """

    rig_text: str
    rig_name: str  # of the file, for sentences
    protocol_text: str
    protocol_name: str
    out: str
    port: str = ""
    baud: int = 0
    seed: int | None = None
    acknowledged_by: str = ""
    created_utc: str = ""
    created_utc_s: float = 0.0
    software: str = ""
    keep_journal: bool = False
    pictures: bool = False  # a display wants fits and maps while the run is on
    may_go_on: bool = False  # somebody is there who can go on after a trip
    ring: str = ""  # where to put the ring for a window; "": none
    state_folder: str = (
        ""  # where a motor's temperature outlives the program; "": nowhere, it is then taken as hot
    )

    @property
    def session(self) -> Path:
        return Path(self.out)

    @property
    def journal(self) -> Path:
        """Where the journal lies while the run is on."""
        return self.session.with_suffix(".journal")

    def to_json(self) -> dict[str, Any]:
        return asdict(self)

    @classmethod
    def from_json(cls, fields: dict[str, Any]) -> Job:
        """TypeError if fields are missing or unknown."""
        return cls(**fields)

    def rig(self) -> RigDescription:
        """The rig on the bench it is to run on. FileProblems if its text cannot be read."""
        rig = rig_from_text(self.rig_text, self.rig_name)
        if self.port:
            rig = replace(rig, driver="board", port=self.port, baud=self.baud or rig.baud)
        if self.seed is not None and rig.world is not None:
            rig = replace(rig, world=replace(rig.world, seed=self.seed))
        return rig

    def protocol(self, rig: RigDescription) -> Protocol:
        return protocol_from_text(self.protocol_text, self.protocol_name, rig)
