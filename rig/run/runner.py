"""The runner: what to do next, from rows, verdicts and the operator. Pure: no bench, no clock, no file.

    state      leaves when                                              to
    ---------  -------------------------------------------------------  ---------
    ready      the first rows have come                                 running
    running    the last action is done                                  stopping
    running    an interlock trips, or the operator halts                stopping
    stopping   the drive register is down, or enable is off             turning
    turning    the crank has stood still for half a second              finished
    turning    it has not after TURNING_AT_MOST_S                       finished (and says so)
    turning    as it stands still, after a trip or halt, if `may_go_on`  waiting
    waiting    the operator ends it                                     finished
    waiting    the operator goes on and the board lets itself be armed  running
    finished   never

A trip while stopping replaces a gentler halt by its own, never a harder one; after that it is only written down.
An interval cut short by a halt has no end event. What the runner does depends on ticks, rows and
verdicts only, so the same session gives the same commands again.

Taps of a staircase's plan are skipped where they could teach nothing: on a body lost from the held state while
falling, and on one thrown from stop to stop, which is tapped by the stops already. On a body that lies on an
end stop while rising, the first CAPTURE_TRIES taps are given away from that stop, as attempts at capture.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from drivers.channels import ChannelTable
from drivers.contract import Halt
from drivers.rows import RowBlock, Status
from rig.description import RigDescription
from rig.events import Event
from rig.run import commands as cm
from rig.run.course import course
from rig.run.inputs import OperatorInput
from rig.run.interlocks import Trip
from rig.run.progress import Standing, Walker
from rig.steps import Protocol
from rig.verdicts import Verdict

READY, RUNNING, STOPPING, TURNING, FINISHED = "ready", "running", "stopping", "turning", "finished"
WAITING = "waiting"
STANDSTILL_S = 0.5
TURNING_AT_MOST_S = 120.0
DONE, HALTED = 0, 3
#: A coast comes before a brake: it is the one halt that asks nothing of the bridge.
HARDNESS = {Halt.RAMP: 0, Halt.BRAKE: 1, Halt.COAST: 2}


class Runner:
    """Walks through a protocol on one rig."""

    def __init__(
        self,
        rig: RigDescription,
        protocol: Protocol,
        channels: ChannelTable,
        tick_hz: int,
        by: str = "",
        *,
        may_go_on: bool = False,
    ) -> None:
        self.rig = rig
        self._by = by
        self._may_go_on = may_go_on
        self.state = READY
        self.tick_hz = tick_hz
        self._protocol = protocol
        self._walker = Walker(rig, course(protocol, rig.limits.slew_v_per_s), channels, tick_hz, by)
        self._exit = (DONE, "done")
        self._stop_from = 0
        self._still_from: int | None = None
        self._off_tick = 0
        self._how: Halt | None = None  # the halt under way

    @property
    def standing(self) -> Standing:
        """Where the run stands, for progress and display."""
        return self._walker.standing

    @property
    def finished(self) -> bool:
        return self.state == FINISHED

    def advance(
        self,
        block: RowBlock,
        flap_hz: float,
        verdicts: Sequence[Verdict] = (),
        trips: Sequence[Trip] = (),
        operator: Sequence[OperatorInput] = (),
        done: Sequence[Event] = (),
    ) -> list[cm.Command]:
        """Commands after one frame of rows.

        `flap_hz` is the crank's present rate; `done` are the events the last commands became, with the ticks
        at which they took effect.
        """
        if self.state == FINISHED:
            return []
        made = self._advance(block, flap_hz, verdicts, trips, operator, done)
        if self.state == FINISHED:
            return made  # nothing is written after a run's end
        return made + self._walker.reasons(operator)

    def _advance(
        self,
        block: RowBlock,
        flap_hz: float,
        verdicts: Sequence[Verdict],
        trips: Sequence[Trip],
        operator: Sequence[OperatorInput],
        done: Sequence[Event],
    ) -> list[cm.Command]:
        tick = int(block.tick[-1])
        if trips and self.state not in (TURNING, WAITING):
            return self._trip(tick, trips)
        ends = [one for one in operator if one.kind in ("halt", "stop")]
        if ends and self.state in (READY, RUNNING, STOPPING):
            return self._halt(tick, ends)
        made: list[cm.Command] = []
        if self.state == READY:
            self.state = RUNNING
            made.append(cm.Record("run", {"rig": self.rig.name, "protocol": self._protocol.name}))
        if self.state == RUNNING:
            made += self._walker.advance(block, tick, flap_hz, verdicts, operator, done)
            if not self._walker.done:
                return made
            return made + self._end(tick)
        if self.state == STOPPING:
            return self._stopping(block, tick, flap_hz, done)
        if self.state == WAITING:
            return self._note_trips(trips) + self._waiting(operator, done)
        return self._note_trips(trips) + self._turning(tick, flap_hz)

    # -- ends ------------------------------------------------------------------------------------------

    def _end(self, tick: int) -> list[cm.Command]:
        """The protocol is through: down gently, then off."""
        if not self._walker.enabled:
            self.state = TURNING
            self._off_tick = tick
            return []
        self.state = STOPPING
        self._stop_from = tick
        return [self._halt_drive(Halt.RAMP, "end of the protocol")]

    def _halt(self, tick: int, ends: Sequence[OperatorInput]) -> list[cm.Command]:
        if self._exit[0] == DONE:
            self._exit = (HALTED, ends[0].reason or "halted by the operator")
        pressed = any(one.kind == "halt" for one in ends)
        how = self.rig.halts.get("operator", Halt.COAST) if pressed else Halt.RAMP
        self.state = STOPPING
        if not self._harder(how):
            return []
        self._stop_from = tick
        return [self._halt_drive(how, ends[0].reason or "operator")]

    def _trip(self, tick: int, trips: Sequence[Trip]) -> list[cm.Command]:
        made = self._note_trips(trips)
        # The hardest halt any of them asks for: a coast takes the torque away at once.
        worst = max(trips, key=lambda trip: HARDNESS[trip.halt])
        self.state = STOPPING
        if self._harder(worst.halt):
            self._stop_from = tick
            made.append(self._halt_drive(worst.halt, worst.cause))
        return made

    def _harder(self, how: Halt) -> bool:
        return self._how is None or HARDNESS[how] > HARDNESS[self._how]

    def _note_trips(self, trips: Sequence[Trip]) -> list[cm.Command]:
        if trips and self._exit[0] == DONE:
            self._exit = (HALTED, trips[0].sentence)
        return [cm.Record("trip", trip.to_json()) for trip in trips]

    def _halt_drive(self, how: Halt, cause: str) -> cm.HaltDrive:
        self._how = how
        data = {"how": how.value, "cause": cause}
        return cm.HaltDrive("halt", data, how, self.rig.limits.slew_v_per_s)

    def _stopping(
        self, block: RowBlock, tick: int, flap_hz: float, done: Sequence[Event]
    ) -> list[cm.Command]:
        for event in done:
            if event.kind == "halt":  # a board says when it took effect: no later than a moment from now
                self._stop_from = max(self._stop_from, min(event.tick, tick + self.tick_hz))
        enabled = bool(block.status & Status.ENABLED)
        ramping = bool(block.status & Status.RAMPING)
        # Frames filled before the halt took effect know nothing of its ramp: taking them for its end would
        # cut the ramp short.
        if int(block.tick[0]) <= self._stop_from or (enabled and ramping):
            return []
        self.state = TURNING
        self._off_tick = tick
        made: list[cm.Command] = []
        if enabled:
            made.append(cm.HaltDrive("", {}, Halt.COAST))
        if flap_hz >= self.rig.limits.standstill_hz:
            made.append(cm.Record("turning", {"flap_hz": round(flap_hz, 3)}))
        return made

    def _turning(self, tick: int, flap_hz: float) -> list[cm.Command]:
        waited_s = (tick - self._off_tick) / self.tick_hz
        if flap_hz >= self.rig.limits.standstill_hz:
            self._still_from = None
        elif self._still_from is None:
            self._still_from = tick
        code, reason = self._exit
        if self._still_from is not None and tick - self._still_from >= STANDSTILL_S * self.tick_hz:
            coast_s = (self._still_from - self._off_tick) / self.tick_hz
            still = cm.Record("standstill", {"coast_s": round(coast_s, 3)})
            if self._may_go_on and code != DONE and not self._walker.done:
                self.state = WAITING
                return [still, cm.Record("waiting", {})]
            return [still, self._finish()]
        if waited_s > TURNING_AT_MOST_S:
            words = f"the crank still turns at {flap_hz:.2f} Hz {math.floor(waited_s)} s after the halt"
            self._exit = (code or HALTED, f"{reason}; {words}")
            return [self._finish()]
        return []

    def _finish(self) -> cm.Finish:
        self.state = FINISHED
        code, reason = self._exit
        return cm.Finish("finished", {"exit_code": code, "reason": reason}, code, reason)

    def _waiting(self, operator: Sequence[OperatorInput], done: Sequence[Event]) -> list[cm.Command]:
        kinds = [one.kind for one in operator]
        if any(event.kind == "rearmed" for event in done):
            self._exit = (DONE, "done")
            self._how = self._still_from = None
            self.state = RUNNING
            self._walker.go_back()
            return []
        if "end" in kinds or "halt" in kinds:
            return [self._finish()]
        if "go_on" in kinds:
            return [cm.Rearm("rearmed", {"by": self._by})]
        return []


__all__ = ["FINISHED", "READY", "RUNNING", "STOPPING", "TURNING", "WAITING", "OperatorInput", "Runner"]
