"""The simulated board: drive register, lock, enable latch, watchdog and trips, on its own row count.

    off --enable--> powered --halt COAST or BRAKE--> off
                    powered --halt RAMP--> falling --at 0 V--> off
    powered, falling --watchdog | stall | current | guard | stop | bridge--> off and latched
    off and latched --clear_latch, cause gone and crank at standstill--> off

A lock of the drive register ends with `unlock`, with a latch, and whenever the drive is armed or a latch is cleared
while it is off: the host that set it may have died, and the next one must find a register it can take back.

Everything here happens between two rows. `row` is the number of rows sampled since boot.
"""

from __future__ import annotations

import math
from collections.abc import Callable

from analysis.mechanism.plant import BRAKING, COASTING, DRIVEN, Plant
from drivers.contract import Halt
from drivers.errors import BenchRefused
from drivers.rows import Status
from drivers.simulated.world import BoardFacts

NEVER = 1 << 62
TURN_PART = 1.0 / 20.0

# Plain integers: arithmetic on flags is slow, and the status is asked for with every frame.
ENABLED, LOCKED, RAMPING = int(Status.ENABLED), int(Status.LOCKED), int(Status.RAMPING)
GUARD_OPEN, STOP_PRESSED = int(Status.GUARD_OPEN), int(Status.STOP_PRESSED)
BRIDGE_FAULT, UNDERVOLTAGE = int(Status.BRIDGE_FAULT), int(Status.UNDERVOLTAGE)

#: Cause of a latch -> status bits that stay set with it.
LATCH_BITS = {
    "watchdog": int(Status.LATCHED | Status.WATCHDOG),
    "stall": int(Status.LATCHED | Status.STALL),
    "current": int(Status.LATCHED | Status.BRIDGE_FAULT),
    "bridge": int(Status.LATCHED | Status.BRIDGE_FAULT),
    "guard": int(Status.LATCHED),
    "stop": int(Status.LATCHED),
}


class Board:
    """State of the board and of its power stage; `tell(kind, data)` takes its notices."""

    def __init__(
        self,
        facts: BoardFacts,
        plant: Plant,
        rows_per_s: float,
        tell: Callable[[str, dict[str, object]], None],
    ) -> None:
        self.facts = facts
        self.row = 0
        self.moved_row = -math.inf  # when the crank was last seen to move on
        self.guard_open = False
        self.stop_pressed = False
        self.bridge_fault = False
        self.undervoltage = False
        self.enabled = False
        self.locked = False
        self.latch: str | None = None
        self._plant = plant
        self._rows_per_s = rows_per_s  # of true time; the register ramps on the board's time
        self._tell = tell
        self._writes = 0
        self._target_v = 0.0
        self._falling_until = NEVER
        self._watchdog_row = NEVER
        self._free_row = NEVER
        self._tap_until = 0
        self._driven_row: int | None = None
        self._still_rows = facts.rows(4.0 * TURN_PART / facts.standstill_hz)
        self._patience_rows = facts.rows(facts.heartbeat_timeout_s)
        self._stall_rows = facts.rows(facts.stall_s)
        plant.motor(COASTING)

    # What the board knows of itself

    @property
    def turning(self) -> bool:
        """Whether the crank moves faster than standstill."""
        return self.row - self.moved_row < self._still_rows

    @property
    def status(self) -> int:
        """Status bits at this row."""
        bits = 0
        if self.enabled:
            bits = ENABLED
            if self._plant.drive_v != self._target_v:
                bits |= RAMPING
        if self.locked:
            bits |= LOCKED
        if self.latch is not None:
            bits |= LATCH_BITS[self.latch]
        if self.guard_open:
            bits |= GUARD_OPEN
        if self.stop_pressed:
            bits |= STOP_PRESSED
        if self.bridge_fault:
            bits |= BRIDGE_FAULT
        if self.undervoltage:
            bits |= UNDERVOLTAGE
        return bits

    @property
    def next_deadline(self) -> int:
        """Row at which the board has to act by itself; NEVER if nothing is pending."""
        return min(self._watchdog_row, self._falling_until, self._free_row)

    # Commands

    def heartbeat(self) -> None:
        if self.enabled:
            self._watchdog_row = self.row + self._patience_rows

    def enable(self) -> None:
        if self.latch is not None:
            raise BenchRefused(f"the board has latched off ({self.latch}); clear the latch before arming")
        contact = self._open_contact()
        if contact:
            raise BenchRefused(f"the power stage stays off: {contact}")
        if self.enabled:
            return
        if self.turning:
            raise BenchRefused("the crank is still turning; wait for standstill before arming")
        self.enabled = True
        self.locked = False  # by a host that is gone: a drive that goes on must be one that can be changed
        self._target_v = 0.0
        self._plant.set_drive(0.0)
        self._plant.motor(DRIVEN)
        self.heartbeat()

    def drive(self, target_v: float, slew_v_per_s: float) -> None:
        if self.locked:
            self._writes += 1
            raise BenchRefused("the drive register is locked for an analysed interval")
        if not self.enabled:
            raise BenchRefused("the power stage is off; arm before driving")
        if self._falling_until != NEVER:
            raise BenchRefused("the drive is being ramped down to a halt")
        if not 0.0 <= target_v <= self.facts.max_voltage_v:
            limit = self.facts.max_voltage_v
            raise BenchRefused(f"{target_v:g} V is outside the board's range of 0 to {limit:g} V")
        if not 0.0 < slew_v_per_s < math.inf:
            raise BenchRefused(f"a slew rate of {slew_v_per_s:g} V/s cannot be ramped")
        self._ramp(target_v, slew_v_per_s)

    def halt(self, how: Halt, slew_v_per_s: float) -> None:
        if self.locked:
            self._writes += 1  # the interval is spoilt, and the count must show it
        if how is Halt.RAMP:
            if not self.enabled or self._falling_until != NEVER:
                return
            if not 0.0 < slew_v_per_s < math.inf:
                raise BenchRefused(f"a slew rate of {slew_v_per_s:g} V/s cannot be ramped")
            self._ramp(0.0, slew_v_per_s)
            fall_s = self._plant.drive_v / slew_v_per_s
            self._falling_until = self.row + max(1, math.ceil(fall_s * self.facts.row_hz - 1e-6))
            return
        self._off(BRAKING if how is Halt.BRAKE else COASTING)

    def lock(self) -> None:
        if self.locked:
            raise BenchRefused("the drive register is locked already")
        self.locked = True
        self._writes = 0

    def unlock(self) -> int:
        """Number of writes to the drive register while it was locked."""
        if not self.locked:
            raise BenchRefused("the drive register is not locked")
        self.locked = False
        return self._writes

    def check_tap(self) -> None:
        """BenchRefused if no tap can be given now."""
        if self._free_row != NEVER:
            raise BenchRefused("the releaser holds the body; no tap can reach it")
        if self.row < self._tap_until:
            raise BenchRefused("the last tap is still under way")

    def tap(self, impulse_n_m_s: float, duration_s: float) -> None:
        self._plant.tap(impulse_n_m_s, duration_s)
        self._tap_until = self.row + self.facts.rows(duration_s)

    def hold(self, angle_rad: float) -> int:
        """The releaser takes the body; row at which it lets go."""
        if self._free_row != NEVER:
            raise BenchRefused("the releaser holds the body already")
        self._plant.hold(angle_rad)
        self._free_row = self.row + self.facts.rows(self.facts.release_hold_s)
        return self._free_row

    def clear_latch(self) -> None:
        if self.latch is not None:
            contact = self._open_contact()
            if contact:
                raise BenchRefused(f"the latch stays set: {contact}")
            if self.turning:
                raise BenchRefused("the latch stays set while the crank is still turning")
            self.latch = None
        # While the drive is on only `unlock` ends a lock, and tells its writes.
        if not self.enabled:
            self.locked = False

    def restart(self) -> None:
        """The processor starts anew: drive off, lock, latch and ramp forgotten."""
        self._off(COASTING)
        self.locked = False
        self.latch = None

    # What the board does by itself

    def act(self) -> None:
        """Do what is due at this row."""
        if self.row >= self._free_row:
            self._plant.let_go()
            self._free_row = NEVER
        if self.row >= self._falling_until:
            self._off(COASTING)
        if self.row >= self._watchdog_row:
            self._cut("watchdog")

    def supervise(self, peak_current_a: float) -> None:
        """Once per frame: trips on what was sampled since the last frame."""
        if not self.enabled:
            self._driven_row = None
            return
        if peak_current_a > self.facts.current_trip_a:
            self._cut("current")
            return
        if self._plant.drive_v < self.facts.stall_v:
            self._driven_row = None
            return
        if self._driven_row is None:
            self._driven_row = self.row
        if self.row - self.moved_row >= self._stall_rows <= self.row - self._driven_row:
            self._cut("stall")

    def contacts_changed(self) -> None:
        """Guard, stop or bridge fault line changed: take the power away if one of them says so."""
        if not self.enabled:
            return
        if self.stop_pressed:
            self._cut("stop")
        elif self.guard_open:
            self._cut("guard")
        elif self.bridge_fault:
            self._cut("bridge")

    def _open_contact(self) -> str:
        if self.stop_pressed:
            return "the stop is pressed"
        if self.guard_open:
            return "the guard is open"
        if self.bridge_fault:
            return "the bridge reports a fault"
        return ""

    def _ramp(self, target_v: float, slew_v_per_s: float) -> None:
        self._target_v = target_v
        # The plant counts true seconds, the board's ramp counts its own ticks.
        self._plant.drive(target_v, slew_v_per_s * self._rows_per_s / self.facts.row_hz)

    def _off(self, mode: int) -> None:
        self.enabled = False
        self._target_v = 0.0
        self._plant.motor(mode)
        self._plant.set_drive(0.0)
        self._falling_until = self._watchdog_row = NEVER
        self._driven_row = None

    def _cut(self, cause: str) -> None:
        self._off(COASTING)
        self.locked = False
        self.latch = cause
        self._tell("latch", {"cause": cause})
