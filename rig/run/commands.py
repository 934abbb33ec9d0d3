"""What the runner asks the loop to do; each may carry the event it becomes, dated with the bench's tick."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from drivers.contract import Halt


@dataclass(frozen=True)
class Command:
    """Base; `kind` and `data` make the event recorded when it has been carried out ("": none)."""

    kind: str = ""
    data: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True)
class Record(Command):
    """Write an event down; nothing is done on the bench."""


@dataclass(frozen=True)
class Enable(Command):
    """Power stage on, at 0 V."""


@dataclass(frozen=True)
class Rearm(Command):
    """Clear the board's latch and the interlocks', so that the drive may be switched on again.

    Refused while a cause persists; the event is then `refused` with the reason.
    """


@dataclass(frozen=True)
class Drive(Command):
    target_v: float = 0.0
    slew_v_per_s: float = 0.0


@dataclass(frozen=True)
class HaltDrive(Command):
    how: Halt = Halt.COAST
    slew_v_per_s: float = 1.0


@dataclass(frozen=True)
class LockDrive(Command):
    """Freeze the drive register for an analysed interval."""


@dataclass(frozen=True)
class UnlockDrive(Command):
    """End of the interval; the event gets `writes`, the number of writes refused meanwhile."""


@dataclass(frozen=True)
class TapBody(Command):
    impulse_n_m_s: float = 0.0


@dataclass(frozen=True)
class ReleaseBody(Command):
    angle_rad: float = 0.0


@dataclass(frozen=True)
class SyncPulse(Command):
    pass


@dataclass(frozen=True)
class PromptOperator(Command):
    """Say something to the operator (tap now, press a key)."""

    text: str = ""


@dataclass(frozen=True)
class Finish(Command):
    """The run is over; the last command."""

    exit_code: int = 0
    reason: str = ""
