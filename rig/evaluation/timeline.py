"""The course of a run as told by its events: levels, their quiet records, their taps."""

from __future__ import annotations

from dataclasses import dataclass, field

from rig.events import Event

#: What tells at which level a run is, or that it is at none.
BOUND = frozenset(
    ("level", "settled", "quiet", "quiet_end", "tap", "tap_end", "observe", "observe_end", "level_end", "release",
     "release_end", "trip", "halt", "finished")
)  # fmt: skip


@dataclass
class TapVisit:
    """One tap and its observation, board ticks."""

    tap: int
    level: int
    tick: int
    impulse_n_m_s: float | None
    by: str
    end_tick: int | None = None
    writes: int | None = None
    excluded: str = ""


@dataclass
class LevelVisit:
    """One stay at one drive, board ticks."""

    level: int
    direction: str
    drive_v: float
    role: str
    start_tick: int
    settled_tick: int | None = None
    settled: bool = False
    end_tick: int | None = None
    quiet: list[tuple[int, int]] = field(default_factory=list)  # undisturbed, drive locked
    taps: list[TapVisit] = field(default_factory=list)
    writes: list[int] = field(default_factory=list)
    gap_tick: int | None = None  # nothing is known of it from here on, unless it is told of again

    def ended_by(self, event: Event) -> TapVisit | None:
        """The tap whose observation an event ends; None where its beginning could not be read."""
        number = event.data.get("tap")
        last = self.taps[-1] if self.taps else None
        return last if last is not None and number in (None, last.tap) else None


class Timeline:
    """Fed with events in order; keeps what the analysis needs of them."""

    def __init__(self) -> None:
        self.levels: list[LevelVisit] = []
        self.trips: list[Event] = []
        self.zeros: list[Event] = []
        self.unread = False  # whether records of the journal are missing
        self._open_quiet: int | None = None

    @property
    def current(self) -> LevelVisit | None:
        """The level being visited, if any."""
        return self.levels[-1] if self.levels and self.levels[-1].end_tick is None else None

    def tap(self, number: int) -> TapVisit | None:
        for level in reversed(self.levels):
            for tap in level.taps:
                if tap.tap == number:
                    return tap
        return None

    def add(self, event: Event) -> None:
        """Take the next event; kinds that say nothing about the course are passed over."""
        data = event.data
        self._look_over_gap(event)
        level = self.current
        if event.kind == "level":
            if level is not None:
                level.end_tick = event.tick
            self.levels.append(
                LevelVisit(
                    level=int(data["level"]),
                    direction=str(data["direction"]),
                    drive_v=float(data["drive_v"]),
                    role=str(data.get("role", "level")),
                    start_tick=event.tick,
                )
            )
        elif event.kind in ("trip", "halt", "finished"):
            if event.kind == "trip":
                self.trips.append(event)
            if level is not None:
                level.end_tick = event.tick
            self._open_quiet = None
        elif event.kind == "unread":
            self.unread = True
            if level is not None and level.gap_tick is None:
                level.gap_tick = event.tick
            self._open_quiet = None
        elif event.kind == "zero":
            self.zeros.append(event)
        elif event.kind == "tap_excluded":
            excluded = self.tap(int(data["tap"]))
            if excluded is not None:
                excluded.excluded = str(data["reason"])
        elif event.kind == "tap_reason":
            excluded = self.tap(int(data["tap"]))
            if excluded is not None and excluded.excluded:  # it leaves nothing out by itself
                excluded.excluded = str(data["reason"])
        elif level is not None:
            self._add_within(level, event)

    def _look_over_gap(self, event: Event) -> None:
        """Whether the level goes on behind a stretch that could not be read; else it ended before, as far as known."""
        level = self.current
        if level is None or level.gap_tick is None or event.kind not in BOUND:
            return
        if event.data.get("level") == level.level and event.kind != "level":
            level.gap_tick = None
        else:
            level.end_tick = level.gap_tick

    def _add_within(self, level: LevelVisit, event: Event) -> None:
        data = event.data
        if event.kind == "settled":
            level.settled_tick = event.tick
            level.settled = bool(data.get("settled", True))
        elif event.kind in ("quiet", "observe"):
            self._open_quiet = event.tick
        elif event.kind in ("quiet_end", "observe_end"):
            if self._open_quiet is not None:
                level.quiet.append((self._open_quiet, event.tick))
                self._open_quiet = None
            if data.get("writes") is not None:
                level.writes.append(int(data["writes"]))
        elif event.kind in ("tap", "release"):
            impulse = data.get("impulse_n_m_s")
            level.taps.append(
                TapVisit(
                    tap=int(data.get("tap", -1)),
                    level=level.level,
                    tick=event.tick,
                    impulse_n_m_s=None if impulse is None else float(impulse),
                    by=str(data.get("by", "release" if event.kind == "release" else "tapper")),
                )
            )
        elif event.kind in ("tap_end", "release_end"):
            tap = level.ended_by(event)
            if tap is None:
                return
            tap.end_tick = event.tick
            if data.get("writes") is not None:
                tap.writes = int(data["writes"])
                level.writes.append(tap.writes)
        elif event.kind == "level_end":
            level.end_tick = event.tick
