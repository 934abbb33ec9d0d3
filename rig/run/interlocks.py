"""Interlocks: every row against every limit. A trip latches, names its cause, and says what to do about it.

They are software and not safety-rated: they protect the motor and the record, not a hand.
"""

from __future__ import annotations

import math
from collections import deque
from dataclasses import dataclass

import numpy as np

from drivers.channels import ChannelTable
from drivers.contract import Halt, Notice
from drivers.rows import RowBlock, Status
from rig.description import DEFAULT_HALTS, RigDescription
from rig.run.figures import apart
from rig.run.turning import TurnCounter
from rig.run.winding import WindingModel

LOSS_WINDOW_S = 10.0
#: Rows needed in the window before a rate of loss means anything.
LOSS_ROWS = 500
STALLED_HZ = 0.5

WHAT_NOW = {
    "current": "check the crank for a jam and the wiring for a short before arming again",
    "voltage": "check the supply and its limit before arming again",
    "winding": "let the motor cool before arming again",
    "travel": "the body went past its end stops: check stops and encoder before arming again",
    "flap_rate": "check that the load is still coupled to the crank before arming again",
    "load": "check the load cell and its mounting before arming again",
    "stale": "check the link to the bench before arming again",
    "loss": "check the link and the load of this computer before arming again",
    "disk": "free some disk space before the next run",
    "stall": "disconnect the supply, find what holds the crank, then arm again",
    "refused": "find out why at the bench before arming again",
    "board": "find the cause at the bench, then clear the latch and arm again",
}


@dataclass(frozen=True)
class Trip:
    """A limit that was crossed; `sentence` is for the operator."""

    cause: str
    sentence: str
    value: float
    limit: float
    halt: Halt

    def to_json(self) -> dict[str, object]:
        """The data of its event."""
        return {**vars(self), "halt": self.halt.value}


@dataclass(frozen=True)
class Margin:
    """How far a quantity is from its limit: value, limit, unit."""

    cause: str
    value: float
    limit: float
    unit: str

    @property
    def used(self) -> float:
        """Share of the limit that is used, 0 to 1 and beyond."""
        return abs(self.value) / self.limit if self.limit else math.inf


class Interlocks:
    """Checks one stream; holds the winding model and the crank's rate."""

    def __init__(
        self,
        rig: RigDescription,
        channels: ChannelTable,
        tick_hz: int,
        winding: WindingModel | None = None,
    ) -> None:
        self._rig = rig
        self._channels = channels
        self._tick_hz = tick_hz
        self._column = {
            name: channels.measuring(name)
            for name in ("body angle", "crank angle", "motor current", "motor voltage", "vertical load")
        }
        crank = self._column["crank angle"]
        counts = 2.0 * math.pi / abs(channels[crank].scale) if crank is not None else 1.0
        self.crank = TurnCounter(counts, tick_hz)
        if winding is None and rig.motor is not None:
            winding = WindingModel(rig.motor, rig.limits.winding_deg_c)
        self.winding = winding
        self._latched: set[str] = set()
        self.taken_away = False  # the drive: by a coast or a brake, until it is switched on again
        self._unlatched = False  # whether the board has been seen without a latch
        self._origin: int | None = None
        self._last_tick: int | None = None
        self._stalled_from: int | None = None
        self._loss: deque[tuple[int, int, int]] = deque()
        self._rows = 0
        self._lost = 0
        self._margins: dict[str, Margin] = {}

    @property
    def flap_hz(self) -> float:
        return self.crank.flap_hz

    @property
    def tripped(self) -> bool:
        """Whether a limit was crossed since the drive was last armed."""
        return bool(self._latched)

    def margins(self) -> tuple[Margin, ...]:
        """Each limit with the largest value of the last frame."""
        return tuple(self._margins.values())

    def check(self, block: RowBlock) -> list[Trip]:
        """Check one frame; new trips only, each cause once."""
        limits = self._rig.limits
        tick = int(block.tick[-1])
        if self._origin is None:
            self._origin = int(block.tick[0])
        trips: list[Trip] = []
        if not block.status & Status.LATCHED:
            self._unlatched = True
        elif self._unlatched:  # its notice may have been lost on the way
            self._board(trips, _why(block.status), tick)
        # Rows from before the latch of an earlier run was cleared are none of this run's trips; arming a board
        # that is still latched is refused there.
        volts, amps = 0.0, 0.0
        if (column := self._column["motor current"]) is not None:
            current = self._channels[column].values(block.raw[:, column])
            amps = float(np.abs(current).max())
            self._limit(trips, "current", "motor current", amps, limits.current_a, "A", tick)
            self._heat(trips, float(current @ current) / len(current), tick)
        if (column := self._column["motor voltage"]) is not None:
            volts = self._largest(block, column)
            # Opening the terminals of a motor under current kicks their voltage up; no supply is behind it.
            if not self.taken_away and not block.status & Status.LATCHED:
                self._limit(trips, "voltage", "motor voltage", volts, limits.voltage_v, "V", tick)
        if (column := self._column["crank angle"]) is not None:
            flap = self.crank.add(tick, int(block.raw[-1, column]))
            self._limit(trips, "flap_rate", "flap rate", flap, limits.flap_hz, "Hz", tick)
            if block.status & Status.ENABLED:
                self._stall(trips, volts, flap, tick)
        if (column := self._column["body angle"]) is not None:
            self._travel(trips, block, column, tick)
        if limits.load_n is not None and (column := self._column["vertical load"]) is not None:
            load = self._largest(block, column)
            self._limit(trips, "load", "vertical load", load, limits.load_n, "N", tick)
        self._losses(trips, block, tick)
        self._last_tick = tick
        return trips

    def rearm(self) -> None:
        """Forget what has tripped, and losses of before; a limit that is still exceeded trips again."""
        self._latched.clear()
        self._unlatched = False
        self._stalled_from = None
        self._loss.clear()
        self._rows = self._lost = 0

    def stale(self, age_s: float) -> list[Trip]:
        """No rows for `age_s` of host time."""
        trips: list[Trip] = []
        limit = self._rig.limits.stale_s
        if age_s > limit:
            age, most = apart(1e3 * age_s, 1e3 * limit, 0)
            sentence = f"no rows came from the bench for {age} ms (limit {most} ms)"
            # The newest row is the last moment of board time that is known: what is told came after it.
            self._trip(trips, "stale", sentence, age_s, limit, self._last_tick or 0, when="after")
        return trips

    def disk(self, free_bytes: float) -> list[Trip]:
        trips: list[Trip] = []
        limit = self._rig.limits.disk_reserve_bytes
        if free_bytes < limit:
            free, least = apart(free_bytes / 1e6, limit / 1e6, 0)
            sentence = f"{free} MB of disk were left (reserve {least} MB)"
            self._trip(trips, "disk", sentence, free_bytes, limit, self._last_tick or 0)
        return trips

    def refused(self, reason: str) -> list[Trip]:
        """The board refused a command, and nothing has told why it is not in the state it should be in."""
        trips: list[Trip] = []
        if "board" not in self._latched:
            self._trip(
                trips, "refused", f"the board refused a command ({reason})", 1.0, 0.0, self._last_tick or 0
            )
        return trips

    def notice(self, notice: Notice) -> list[Trip]:
        """A latch the board set by itself is a trip, whatever made it do so."""
        trips: list[Trip] = []
        if notice.kind == "latch":
            self._board(trips, str(notice.data.get("cause", "unknown")), notice.tick)
        return trips

    def _board(self, trips: list[Trip], cause: str, tick: int) -> None:
        self._trip(trips, "board", f"the board switched the drive off by itself ({cause})", 1.0, 0.0, tick)

    # -- single limits ---------------------------------------------------------------------------------

    def _largest(self, block: RowBlock, column: int) -> float:
        raw = block.raw[:, column]
        channel = self._channels[column]
        ends = (int(raw.min()), int(raw.max()))
        return max(abs(raw_end * channel.scale + channel.offset) for raw_end in ends)

    def _limit(
        self, trips: list[Trip], cause: str, what: str, value: float, limit: float, unit: str, tick: int
    ) -> None:
        self._margins[cause] = Margin(cause, value, limit, unit)
        if value > limit:
            told, most = apart(value, limit, 2)
            sentence = f"{what} {told} {unit} exceeded {most} {unit}"
            self._trip(trips, cause, sentence, value, limit, tick)

    def _heat(self, trips: list[Trip], mean_square: float, tick: int) -> None:
        if self.winding is None:
            return
        before = self._last_tick if self._last_tick is not None else tick
        hot = self.winding.add(mean_square, (tick - before) / self._tick_hz)
        self._limit(
            trips, "winding", "winding temperature", hot, self._rig.limits.winding_deg_c, "degC", tick
        )

    def _travel(self, trips: list[Trip], block: RowBlock, column: int, tick: int) -> None:
        channel, limits = self._channels[column], self._rig.limits
        raw = block.raw[:, column]
        ends = sorted(
            (channel.offset + channel.scale * int(raw.min()), channel.offset + channel.scale * int(raw.max()))
        )
        outside = ends[1] > limits.travel_high_rad or ends[0] < limits.travel_low_rad
        high = ends[1] - limits.travel_high_rad > limits.travel_low_rad - ends[0]
        value, limit = (ends[1], limits.travel_high_rad) if high else (ends[0], limits.travel_low_rad)
        self._margins["travel"] = Margin("travel", math.degrees(value), abs(math.degrees(limit)), "deg")
        if outside:
            told, most = apart(math.degrees(value), math.degrees(limit), 2)
            sentence = f"body angle {told} deg went past {most} deg"
            self._trip(trips, "travel", sentence, value, limit, tick)

    def _stall(self, trips: list[Trip], volts: float, flap_hz: float, tick: int) -> None:
        limits = self._rig.limits
        if volts < limits.stall_v or flap_hz > STALLED_HZ:
            self._stalled_from = None
            return
        if self._stalled_from is None:
            self._stalled_from = tick
        stalled_s = (tick - self._stalled_from) / self._tick_hz
        if stalled_s >= limits.stall_s:
            sentence = f"the crank has not turned for {stalled_s:.2f} s at {volts:.2f} V"
            self._trip(trips, "stall", sentence, stalled_s, limits.stall_s, tick)

    def _losses(self, trips: list[Trip], block: RowBlock, tick: int) -> None:
        self._loss.append((tick, len(block), block.lost_rows))
        self._rows += len(block)
        self._lost += block.lost_rows
        while tick - self._loss[0][0] > LOSS_WINDOW_S * self._tick_hz:
            _, rows, lost = self._loss.popleft()
            self._rows -= rows
            self._lost -= lost
        total = self._rows + self._lost
        share = self._lost / total
        limit = self._rig.limits.loss_fraction
        self._margins["loss"] = Margin("loss", share, limit, "1")
        if total >= LOSS_ROWS and share > limit:
            told, most = apart(100 * share, 100 * limit, 1)
            span_s = total / self._rig.sample_hz  # less than the window where the run is younger
            sentence = f"{told} % of the rows of the last {span_s:.1f} s were lost (limit {most} %)"
            self._trip(trips, "loss", sentence, share, limit, tick)

    def _trip(
        self,
        trips: list[Trip],
        cause: str,
        sentence: str,
        value: float,
        limit: float,
        tick: int,
        when: str = "at",
    ) -> None:
        if cause in self._latched:
            return
        self._latched.add(cause)
        halt = self._rig.halts.get(cause, DEFAULT_HALTS[cause])
        at_s = (tick - (self._origin or 0)) / self._tick_hz
        # The time comes first: behind a limit it would read as if it belonged to that.
        full = f"{when} {at_s:.3f} s, {sentence}; drive off ({halt.value}): {WHAT_NOW[cause]}."
        trips.append(Trip(cause, full[0].upper() + full[1:], value, limit, halt))


def _why(status: int) -> str:
    """The cause of a latch as far as the status bits tell it."""
    causes = {
        Status.STOP_PRESSED: "stop",
        Status.GUARD_OPEN: "guard",
        Status.STALL: "stall",
        Status.WATCHDOG: "watchdog",
        Status.BRIDGE_FAULT: "bridge",
        Status.UNDERVOLTAGE: "undervoltage",
    }
    return next((cause for bit, cause in causes.items() if status & bit), "unknown")
