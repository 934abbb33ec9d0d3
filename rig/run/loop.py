"""The loop of a run: bench, interlocks, journal, analysis and runner, one frame at a time.

    frame -> interlocks -> heartbeat if content -> journal -> analyst -> runner -> commands -> events

One frame is one turn of the loop at every pace: what the runner does must depend on board ticks, not on how
many frames a read happened to bring. Whatever ends a run leaves the drive off and the journal whole.
"""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol

from drivers.clock import Clock
from drivers.contract import Bench, Halt, Hello, Notice, Reading
from drivers.errors import BenchError, BenchRefused
from drivers.rows import RowBlock, RowFrame
from rig.description import RigDescription
from rig.events import Event
from rig.record.errors import JournalFailure
from rig.run import commands as cm
from rig.run.clockline import ClockPairs
from rig.run.inputs import OperatorInput
from rig.run.interlocks import Interlocks, Trip
from rig.run.interrupt import HaltSignals
from rig.run.progress import Standing
from rig.run.runner import Runner
from rig.run.winding import WindingModel
from rig.steps import Protocol as BenchProtocol
from rig.verdicts import Verdict

LINK_FAILED, HALTED = 4, 3


class Analysis(Protocol):
    """What the loop asks of the analysis."""

    def feed(self, blocks: Sequence[RowBlock], events: Sequence[Event]) -> list[Verdict]: ...


class Book(Protocol):
    """What the loop asks of the journal."""

    @property
    def free_bytes(self) -> int: ...

    def frame(self, frame: RowFrame) -> None: ...

    def losses(self, rows: int, frames: int, overruns: int) -> None: ...

    def event(self, event: Event) -> None: ...

    def flush(self) -> None: ...


class Operator(Protocol):
    """What comes from the person at the bench, and what is said to them."""

    def inputs(self) -> Sequence[OperatorInput]: ...

    def prompt(self, text: str) -> None: ...


@dataclass(frozen=True)
class RunOutcome:
    """How a run ended."""

    exit_code: int
    reason: str
    trips: tuple[Trip, ...] = ()


#: Called once a frame: board time in s since the first row, where the run stands, new verdicts.
Progress = Callable[[float, Standing, Sequence[Verdict]], None]


class Loop:
    """One run. `bench` is open already; it is left open, with the drive off."""

    def __init__(
        self,
        bench: Bench,
        hello: Hello,
        rig: RigDescription,
        protocol: BenchProtocol,
        journal: Book,
        analyst: Analysis,
        clock: Clock,
        progress: Progress | None = None,
        operator: Operator | None = None,
        *,
        winding: WindingModel | None = None,
        by: str = "",
        rows_seen: Callable[[RowBlock], None] | None = None,
        may_go_on: bool = False,
    ) -> None:
        self._bench = bench
        self._hello = hello
        self._rig = rig
        self._journal = journal
        self._analyst = analyst
        self._clock = clock
        self._progress = progress
        self._operator = operator
        self._clocks = ClockPairs(hello.tick_hz)
        self._away_s = 0.0  # longest time in which the line was not being read
        self._gap_s = 0.0  # longest time between two readings that brought rows
        self._rows_seen = rows_seen  # e.g. a ring for a window; called with every block, after the heartbeat
        if winding is None and rig.motor is not None and rig.simulated and rig.world is not None:
            # The history of a simulated motor is known: its file says at what temperature it begins.
            winding = WindingModel(rig.motor, rig.limits.winding_deg_c, rig.world.winding_start_deg_c)
        self.interlocks = Interlocks(rig, hello.channels, hello.tick_hz, winding)
        self.runner = Runner(rig, protocol, hello.channels, hello.tick_hz, by, may_go_on=may_go_on)
        # One frame a read: what a frame decides then takes effect before the next one, at every pace.
        self._wait_s = hello.frame_rows * hello.row_period_ticks / hello.tick_hz
        self._tick = 0
        self._origin: int | None = None
        self._overruns: int | None = None
        self._verdicts: list[Verdict] = []
        self._trips: list[Trip] = []
        self._done: list[Event] = []
        self._refusal = ""  # what the board said of the last command it refused
        self._outcome: RunOutcome | None = None
        self._signals = HaltSignals()
        self._signal_told = False

    def run(self) -> RunOutcome:
        """Go on until the protocol is through, or something ends it; never raises for a bench or a disk.

        Ctrl-C halts and waits for standstill; a second one leaves at once, with the drive off.
        """
        try:
            with self._signals:
                return self._go_on()
        except BenchError as error:
            return self._broken(LINK_FAILED, str(error), error)
        except JournalFailure as error:
            return self._broken(HALTED, str(error), error)
        except KeyboardInterrupt:
            return self._broken(HALTED, "halted by the operator, who did not wait for standstill", None)
        except BaseException:
            with contextlib.suppress(BenchError):
                self._bench.halt(Halt.COAST)
            raise

    def _go_on(self) -> RunOutcome:
        fresh_s = back_s = self._clock.now_s()
        while self._outcome is None:
            self._away_s = max(self._away_s, self._clock.now_s() - back_s)
            reading = self._bench.read(self._wait_s)
            now_s = back_s = self._clock.now_s()
            if reading.blocks:
                self._gap_s = max(self._gap_s, now_s - fresh_s)
                fresh_s = now_s
                self._clocks.add(now_s, int(reading.blocks[-1].tick[-1]))
                self._take(reading)
            else:
                self._without_rows(now_s - fresh_s, reading.notices)
        return self._outcome

    # -- one turn --------------------------------------------------------------------------------------

    def _take(self, reading: Reading) -> None:
        notices = list(reading.notices)
        for frame, block in zip(reading.frames, reading.blocks, strict=True):
            self._tick = int(block.tick[-1])
            if self._origin is None:
                self._origin = int(block.tick[0])
            trips = self._interlocks(block, notices)
            if not trips and frame is reading.frames[-1]:
                # Once all that was read has passed. Also after a trip, once it has been dealt with: a ramp down needs
                # a board that stays on.
                self._bench.heartbeat()
            self._record(frame, block)
            if self._rows_seen is not None:
                self._rows_seen(block)
            events = [Event(notice.tick, "notice", _told(notice)) for notice in notices]
            for event in events:
                self._journal.event(event)
            notices = []
            verdicts = self._verdicts + self._analyst.feed([block], events)
            self._verdicts = []
            operator = self._inputs()
            done, self._done = self._done, []
            commands = self.runner.advance(block, self.interlocks.flap_hz, verdicts, trips, operator, done)
            for command in commands:
                try:
                    self._carry_out(command)
                except BenchRefused as refusal:
                    # Most likely the board has just switched off by itself: the next rows will tell why.
                    self._refusal = str(refusal)
                    break
            if self._progress is not None:
                time_s = (self._tick - self._origin) / self._hello.tick_hz
                self._progress(time_s, self.runner.standing, verdicts)
            if self._outcome is not None:
                return

    def _inputs(self) -> list[OperatorInput]:
        inputs = list(self._operator.inputs()) if self._operator is not None else []
        if self._signals.asked and not self._signal_told:
            self._signal_told = True
            inputs.append(OperatorInput("halt"))
            if self._operator is not None:
                self._operator.prompt("halted; off does not mean stopped: waiting for standstill")
        return inputs

    def _interlocks(self, block: RowBlock, notices: Sequence[Notice]) -> list[Trip]:
        trips: list[Trip] = []
        for notice in notices:
            trips += self.interlocks.notice(notice)
        trips += self.interlocks.check(block)
        if self._refusal:
            trips += self.interlocks.refused(self._refusal)
            self._refusal = ""
        trips += self.interlocks.disk(self._journal.free_bytes)
        self._trips += trips
        return trips

    def _record(self, frame: RowFrame, block: RowBlock) -> None:
        overruns = 0 if self._overruns is None else (block.overruns - self._overruns) & 0xFFFF
        self._overruns = block.overruns
        if block.lost_rows or block.lost_frames or overruns:
            self._journal.losses(block.lost_rows, block.lost_frames, overruns)
            data = {"rows": block.lost_rows, "frames": block.lost_frames, "overruns": overruns}
            self._event(Event(int(block.tick[0]), "loss", data))
        self._journal.frame(frame)

    def _without_rows(self, age_s: float, notices: Sequence[Notice]) -> None:
        """Nothing came: no heartbeat, and past the limit the run is over, for nobody can see the bench."""
        for notice in notices:
            self._event(Event(notice.tick, "notice", _told(notice)))
        trips = self.interlocks.stale(age_s)
        if not trips:
            return
        self._trips += trips
        trip = trips[0]
        with contextlib.suppress(BenchError):  # the board's own watchdog has it by now
            self._bench.halt(trip.halt)
        self._event(Event(self._tick, "trip", trip.to_json()))
        self._event(Event(self._tick, "halt", {"how": trip.halt.value, "cause": trip.cause}))
        self._finish(LINK_FAILED, trip.sentence)

    def _event(self, event: Event) -> None:
        self._journal.event(event)
        self._verdicts += self._analyst.feed([], [event])

    def _carry_out(self, command: cm.Command) -> None:
        bench, tick, data = self._bench, self._tick, dict(command.data)
        match command:
            case cm.Enable():
                tick = bench.enable()
                self.interlocks.taken_away = False
            case cm.Rearm():
                try:
                    bench.clear_latch()
                except BenchRefused as refusal:
                    command = cm.Record("refused", {"reason": str(refusal)})
                    data = dict(command.data)
                    if self._operator is not None:
                        self._operator.prompt(str(refusal))
                else:
                    self.interlocks.rearm()
            case cm.Drive():
                tick = bench.drive(command.target_v, command.slew_v_per_s)
            case cm.HaltDrive():
                tick = bench.halt(command.how, command.slew_v_per_s)
                self.interlocks.taken_away = command.how is not Halt.RAMP
            case cm.LockDrive():
                tick = bench.lock()
            case cm.UnlockDrive():
                tick, data["writes"] = bench.unlock()
            case cm.TapBody():
                tick = bench.tap(command.impulse_n_m_s)
            case cm.ReleaseBody():
                tick = bench.release(command.angle_rad)
            case cm.SyncPulse():
                tick = bench.sync()
            case cm.PromptOperator():
                if self._operator is not None:
                    self._operator.prompt(command.text)
            case cm.Finish():
                self._finish(command.exit_code, command.reason)
                return
        if command.kind:
            event = Event(tick, command.kind, data)
            self._done.append(event)
            self._event(event)

    # -- ends ------------------------------------------------------------------------------------------

    def _finish(self, code: int, reason: str) -> None:
        # In process there is one clock only.
        line = self._clocks.line() if self._hello.capabilities.hardware else None
        if line is not None:
            told = {**vars(line), "longest_away_s": self._away_s, "longest_gap_s": self._gap_s}
            rounded = {name: round(value, 6) for name, value in told.items()}
            self._event(Event(self._tick, "clock", rounded))
        self._event(Event(self._tick, "finished", {"exit_code": code, "reason": reason}))
        self._journal.flush()
        self._outcome = RunOutcome(code, reason, tuple(self._trips))

    def _broken(self, code: int, reason: str, error: Exception | None) -> RunOutcome:
        """Something beyond the protocol's control ended the run: drive off first, then the paper work."""
        with contextlib.suppress(BenchError):  # out of reach: the board's own watchdog has it
            self._bench.halt(Halt.COAST)
        if not isinstance(error, JournalFailure):
            try:
                self._event(Event(self._tick, "halt", {"how": Halt.COAST.value, "cause": reason}))
                self._event(Event(self._tick, "finished", {"exit_code": code, "reason": reason}))
                self._journal.flush()
            except JournalFailure as failure:
                reason = f"{reason}; {failure}"
        return RunOutcome(code, reason, tuple(self._trips))


def _told(notice: Notice) -> dict[str, object]:
    return {"notice": notice.kind, **{key: value for key, value in notice.data.items() if key != "kind"}}
