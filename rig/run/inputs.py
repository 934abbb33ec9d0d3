"""What the operator can do while a run is on."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class OperatorInput:
    """One of: "halt" the run, "acknowledge" a prompt, or "redo" the last tap, leaving it out."""

    kind: str
    reason: str = ""
