"""Board ticks as seconds since the start of the session."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from rig.description import RigDescription


@dataclass(frozen=True)
class BoardClock:
    """First tick of the session's stream and ticks per second."""

    first_tick: int
    tick_hz: int

    @classmethod
    def of(cls, rig: RigDescription, streams: Any) -> BoardClock:
        """Clock of a stream: its own first tick where it keeps ticks, else 0."""
        ticks = getattr(streams, "tick", None)
        return cls(int(ticks[0]) if ticks is not None and len(ticks) else 0, rig.tick_hz)

    def seconds(self, tick: int) -> float:
        """Session time of a tick, s; ticks before the first row are negative."""
        return (int(tick) - self.first_tick) / self.tick_hz
