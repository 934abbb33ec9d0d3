"""The driver contract: what every bench, simulated or real, must be able to do.

Lifecycle:  closed --open--> idle --enable--> powered --halt/trip--> idle --close--> closed

Every command is acknowledged with the board tick at which it took effect. The board, not the host,
runs ramps, times taps and holds the drive register still while it is locked. After `heartbeat` has
been missing for `heartbeat_timeout_s` the board halts by itself and latches. A latch and a fresh arm end
a lock: no drive goes on that the host could not take back.
"""

from __future__ import annotations

import enum
from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass, field

from drivers.channels import ChannelTable
from drivers.rows import RowBlock, RowFrame


class Halt(enum.Enum):
    """Ways to take the drive away. None of them stops a flywheel at once."""

    COAST = "coast"  # enable off, terminals open
    BRAKE = "brake"  # terminals shorted: fast, heats the winding
    RAMP = "ramp"  # controlled fall to zero, then coast


@dataclass(frozen=True)
class Capabilities:
    """What a bench has beyond drive and sampler; a command it lacks raises BenchMisuse."""

    tapper: bool = False
    sync: bool = False
    release: bool = False  # can hold the body at an angle and let go
    brake: bool = True
    lock: bool = True
    hardware: bool = True  # False: an in-process simulation, nothing can be hurt
    stall_trip: bool = True
    guard_input: bool = True


@dataclass(frozen=True)
class Hello:
    """What a bench says of itself when opened."""

    name: str
    firmware: str
    tick_hz: int
    row_period_ticks: int
    frame_rows: int
    channels: ChannelTable
    capabilities: Capabilities
    heartbeat_timeout_s: float = 0.2
    max_voltage_v: float = 60.0


@dataclass(frozen=True)
class Notice:
    """Something the board tells on its own: a latch, a stall trip, a sync edge, a text line."""

    tick: int
    kind: str
    data: dict[str, object] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Reading:
    """What one `read` brought: frames as received, the same rows placed in time, and notices."""

    frames: Sequence[RowFrame] = ()
    blocks: Sequence[RowBlock] = ()
    notices: Sequence[Notice] = ()


class Bench(ABC):
    """A drive, a sampler and, if present, a tapper, a sync line and a releaser.

    Not thread-safe: one owner opens, commands, reads and closes. `close` may be called at any time,
    any number of times, and leaves the drive off.
    """

    @abstractmethod
    def open(self) -> Hello:
        """Connect and identify. Raises LinkError, LinkTimeout."""

    @abstractmethod
    def close(self) -> None:
        """Drive off (coast) and disconnect; never raises BenchError."""

    @abstractmethod
    def read(self, max_wait_s: float) -> Reading:
        """Wait up to `max_wait_s` for rows; an empty Reading if none came. Raises LinkError."""

    @abstractmethod
    def heartbeat(self) -> None:
        """Tell the board that the interlock loop is alive and content."""

    @abstractmethod
    def enable(self) -> int:
        """Power stage on at 0 V, its register not locked; tick of effect.

        Raises BenchRefused while latched or turning. Of a drive that is on already it changes nothing.
        """

    @abstractmethod
    def drive(self, target_v: float, slew_v_per_s: float) -> int:
        """Ramp the drive register to `target_v` on the board; tick at which the ramp starts.

        Raises BenchRefused when not enabled, when locked, or out of the board's range.
        """

    @abstractmethod
    def halt(self, how: Halt, slew_v_per_s: float = 1.0) -> int:
        """Take the drive away; always accepted, also while locked or latched."""

    @abstractmethod
    def lock(self) -> int:
        """Freeze the drive register; from here on every write to it is refused and counted."""

    @abstractmethod
    def unlock(self) -> tuple[int, int]:
        """End the lock; (tick, number of writes to the drive register while locked).

        Raises BenchRefused if it is not locked: after a latch nobody can vouch for the interval.
        """

    @abstractmethod
    def tap(self, impulse_n_m_s: float) -> int:
        """One tap with the tapper; tick at which it begins. Positive lifts the head."""

    @abstractmethod
    def sync(self) -> int:
        """One pulse on the sync line; its tick."""

    @abstractmethod
    def release(self, angle_rad: float) -> int:
        """Hold the body at rest at `angle_rad`, then let go; tick of letting go."""

    @abstractmethod
    def clear_latch(self) -> None:
        """Acknowledge a latched halt. Raises BenchRefused while its cause persists or it still turns."""
