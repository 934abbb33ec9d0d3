"""What the operator can do while a run is on."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class OperatorInput:
    """What was pressed, or what its silence means.

    "halt" the run as the rig file says for the operator, "stop" it with a ramp down, "acknowledge" a prompt,
    or "redo" the last tap, leaving it out. `reason` is recorded with what follows from it.
    """

    kind: str
    reason: str = ""
