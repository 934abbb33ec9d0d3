"""Where a report's numbers come from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True)
class Provenance:
    """What the session file and the program say of themselves. Empty text means: not known."""

    session_name: str = ""
    session_sha256: str = ""
    created_utc: str = ""  # when the run began
    analysed_utc: str = ""
    acknowledged_by: str = ""  # who read the cautions before power
    pace: str = ""  # "real" or "fast"
    firmware: str = ""
    changed: str = ""  # since it was sealed, as the end of a sentence; "" if nothing is known to be
    recovered: str = ""  # how its journal was found if that was not whole, after "was"
    software: Mapping[str, str] = field(default_factory=dict)  # distribution -> version
