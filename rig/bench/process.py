"""One run in the bench process: from the job on the control pipe to a sealed session.

Whatever fails is told to the client in one sentence with its exit code; whatever happens, the drive is off and
the journal whole before anything else is done.
"""

from __future__ import annotations

import gc
import os
import sys
from collections.abc import Sequence
from contextlib import ExitStack, suppress
from dataclasses import asdict
from pathlib import Path
from typing import Any

from drivers.clock import Clock, HostClock
from drivers.contract import Bench, Hello
from drivers.errors import BenchError
from drivers.ports import malformed
from drivers.rows import RowBlock
from rig.bench.books import JournalledAnalysis, ToldJournal
from rig.bench.control import Control
from rig.bench.job import Job
from rig.bench.motor_memory import MotorMemory
from rig.bench.remote_analysis import AnalysisGone, RemoteAnalysis
from rig.bench.ring import RingFailure, RingWriter
from rig.bench.samplers import Samplers
from rig.bench_source import bench_for
from rig.description import RigDescription
from rig.events import Event
from rig.problem import FileProblems
from rig.record.errors import RecordError
from rig.record.journal import JournalWriter
from rig.run.agreement import agreed, named_otherwise
from rig.run.header import run_header
from rig.run.inputs import OperatorInput
from rig.run.loop import Loop, RunOutcome
from rig.run.progress import Standing
from rig.run.runner import READY, RUNNING
from rig.steps import Protocol
from rig.verdicts import Verdict

USAGE, HALTED, HARDWARE = 2, 3, 4
JOB_S = 30.0
#: Board time between two reports of where the run stands.
REPORT_S = 0.05
RING_BINS = 1 << 16
FIRST = -10
BINS_PER_S = 1000.0


class Failed(Exception):
    """The run cannot begin; `code` is the exit code, `str(error)` the sentence."""

    def __init__(self, code: int, sentence: str) -> None:
        super().__init__(sentence)
        self.code = code


class Watch:
    """The operator as the loop hears it: the client's inputs, its silence, and a broken analysis."""

    def __init__(self, control: Control, analysis: RemoteAnalysis) -> None:
        self._control = control
        self._analysis = analysis
        self._told = False

    def inputs(self) -> Sequence[OperatorInput]:
        made = list(self._control.inputs())
        trouble = "" if self._told else self._analysis.trouble()
        if trouble:
            self._told = True
            made.append(OperatorInput("stop", f"{trouble}; drive ramped down"))
        if self._told:
            made.append(OperatorInput("end"))  # nothing could be judged if the run went on
        return made

    def prompt(self, text: str) -> None:
        self._control.prompt(text)


class Run:
    """The parts of one run, opened in an order in which nothing is powered before all of it is ready."""

    def __init__(self, job: Job, control: Control, clock: Clock, stack: ExitStack) -> None:
        self._job = job
        self._control = control
        self._clock = clock
        self._next_report_s = 0.0
        try:
            self.rig: RigDescription = job.rig()
            self.protocol: Protocol = job.protocol(self.rig)
        except FileProblems as error:
            raise Failed(USAGE, "; ".join(str(problem) for problem in error.problems)) from None
        if self.rig.driver == "board" and (wrong := malformed(self.rig.port)):
            raise Failed(USAGE, wrong)
        if job.session.exists():
            raise Failed(USAGE, f"{job.session} is there already; choose another name with --out")
        self.analysis = RemoteAnalysis(clock)
        stack.callback(lambda: self.analysis.close())
        try:
            self.bench: Bench = bench_for(self.rig, clock)
            self.analysis.wait_until_warm()
            hello = self.bench.open()
            stack.callback(self.bench.close)
            on_board = self.rig.driver == "board"
            self.hello: Hello = agreed(self.rig, hello) if on_board else hello
            self._stranger = named_otherwise(self.rig, hello) if on_board else ""
            # Whoever starts a run arms the board anew; it refuses while the cause of a latch is still there.
            self.bench.clear_latch()
            self.samplers = Samplers(self.rig.samplers, clock, self.hello.tick_hz)
            stack.callback(self.samplers.close)
        except AnalysisGone as error:
            raise Failed(HALTED, str(error)) from None
        except BenchError as error:
            raise Failed(HARDWARE, str(error)) from None
        header = run_header(
            self.rig,
            self.protocol,
            self.hello,
            created_utc=job.created_utc,
            software=job.software,
            pace="real",
            acknowledged_by=job.acknowledged_by,
        )
        try:
            reserve = self.rig.limits.disk_reserve_bytes
            self.journal = JournalWriter(job.journal, header, reserve_bytes=reserve)
        except RecordError as error:
            raise Failed(USAGE, str(error)) from None
        stack.callback(self._leave_journal)
        self.ring = _ring(Path(job.ring), self.hello) if job.ring else None
        if self.ring is not None:
            stack.callback(self.ring.close)
        self._turns = self._tick = 0
        self.analysis.follow(job.journal, job.seed, pictures=job.pictures)
        self._began_s = clock.now_s()
        self._motor = MotorMemory(self.rig, job.state_folder, job.created_utc_s)
        self.loop: Loop | None = None
        self._told = ToldJournal(self.journal, control.writer)
        self._kept = JournalledAnalysis(self.analysis, self.journal, control.writer)

    def carry_out(self) -> RunOutcome:
        """The run itself."""
        client = self._control.writer
        client.send(
            {
                "ready": {
                    "journal": str(self._job.journal),
                    "ring": self._job.ring if self.ring is not None else "",
                    "bench": self.hello.name,
                    "tick_hz": self.hello.tick_hz,
                    "firmware": self.hello.firmware,
                    "analysis_pid": self.analysis.pid,
                    "channels": [channel.name for channel in self.hello.channels],
                }
            }
        )
        self.loop = Loop(
            self.bench,
            self.hello,
            self.rig,
            self.protocol,
            self._told,
            self._kept,
            self._clock,
            self._report,
            Watch(self._control, self.analysis),
            winding=self._motor.winding,
            by=self._job.acknowledged_by,
            rows_seen=self._show,
            may_go_on=self._job.may_go_on,
        )
        # Everything loaded so far stays: collecting it again and again would hold up the loop for tens of ms.
        gc.collect()
        gc.freeze()
        # The threads of journal and pipes give way to the loop within a millisecond.
        sys.setswitchinterval(1e-3)
        outcome = self.loop.run()
        self._motor.keep(self._clock.now_s() - self._began_s)
        return outcome

    def conclude(self) -> dict[str, Any]:
        """Results of the whole journal; a fresh analysis does it if the one of the run has died."""
        self.journal.flush()
        told = self._kept.kept
        try:
            verdicts, result = self.analysis.finish()
        except AnalysisGone:
            self.analysis.close()
            self.analysis = RemoteAnalysis(self._clock)
            self.analysis.wait_until_warm()
            self.analysis.follow(self._job.journal, self._job.seed)
            verdicts, result = self.analysis.finish()
            verdicts = verdicts[told:]  # it begins again from the first row
        for verdict in verdicts:
            self._kept.keep(verdict)
        return result

    def _show(self, block: RowBlock) -> None:
        self._turns += 1
        if self.ring is not None:
            self.ring.add(block)
            self.ring.tell(
                committed_bytes=self.journal.committed,
                committed_sequence=self.journal.committed_sequence,
                heartbeat_tick=int(block.tick[-1]),
                turns=self._turns,
            )
        tick = self._tick = int(block.tick[-1])
        if self._stranger:
            self._notice(tick, "other_board", self._stranger)
            self._stranger = ""
        for words in self.samplers.write(self.journal, tick, self._running):
            self._notice(tick, "sampler", words)

    @property
    def _running(self) -> bool:
        """Whether neither a limit nor anybody has ended the run."""
        loop = self.loop
        return loop is not None and not loop.interlocks.tripped and loop.runner.state in (READY, RUNNING)

    def _notice(self, tick: int, what: str, words: str) -> None:
        self._told.event(Event(tick, "notice", {"notice": what, "text": words}))
        self._control.prompt(words)

    def _report(self, time_s: float, standing: Standing, verdicts: Sequence[Verdict]) -> None:
        if time_s < self._next_report_s or self.loop is None:
            return
        self._next_report_s = time_s + REPORT_S
        told = {
            "time_s": time_s,
            "tick": self._tick,
            "standing": asdict(standing),
            "run_state": self.loop.runner.state,
            "flap_hz": self.loop.interlocks.flap_hz,
            "margins": [vars(margin) for margin in self.loop.interlocks.margins()],
            "free_bytes": self.journal.free_bytes,
            "committed": self.journal.committed,
            "committed_sequence": self.journal.committed_sequence,
        }
        self._control.writer.send({"standing": told}, droppable=True)

    def _leave_journal(self) -> None:
        """Close a journal that was not ended: what it holds stays for `haltere recover`."""
        try:
            self.journal.close(ended=False)
        except RecordError as error:
            print(f"haltere: {error}", file=sys.stderr)


def _ring(path: Path, hello: Hello) -> RingWriter | None:
    """The ring for a window. A run can do without: what fails here is told and no more."""
    row_hz = hello.tick_hz / hello.row_period_ticks
    names = [channel.name for channel in hello.channels]
    try:
        return RingWriter(path, names, hello.tick_hz, max(1, round(row_hz / BINS_PER_S)), RING_BINS)
    except RingFailure as failure:
        print(f"haltere: no live traces: {failure}", file=sys.stderr)
        return None


def one_run(job: Job, control: Control, clock: Clock) -> dict[str, Any]:
    """Carry out a job; what is to be told at its end. Raises Failed."""
    with ExitStack() as stack:
        run = Run(job, control, clock, stack)
        outcome = run.carry_out()
        run.bench.close()
        code, reason = outcome.exit_code, outcome.reason
        # The drive is off. From here on nothing hurries.
        control.writer.send({"stopped": {"exit_code": code, "reason": reason}})
        try:
            result = run.conclude()
            run.journal.result({"which": "final", **result})
            run.journal.close()
        except (RecordError, AnalysisGone) as error:
            code, reason = code or HALTED, f"{reason}; {error}"
    try:
        from rig.record.sealing import seal  # late: HDF5 has no place in a process with a running motor

        seal(job.journal, job.session, keep_journal=job.keep_journal)
    except RecordError as error:
        raise Failed(HALTED, f"{error}; the journal {job.journal} is kept") from None
    return {"exit_code": code, "reason": reason, "session": str(job.session)}


def main() -> None:
    """Entry of the process. Standard output belongs to the protocol with the client."""
    # Where it is allowed, the loop that feeds the heartbeat comes before whatever else this computer does. Before any
    # thread is made: one of lower rank that holds the interpreter and does not get on would hold up the loop too.
    with suppress(OSError, AttributeError):
        os.setpriority(os.PRIO_PROCESS, 0, FIRST)
    clock = HostClock()
    control = Control(sys.stdin.fileno(), os.dup(sys.stdout.fileno()), clock)
    os.dup2(sys.stderr.fileno(), sys.stdout.fileno())  # a stray print must not break the protocol
    code = HARDWARE
    try:
        line = control.reader.wait(JOB_S)
        if line is None or "job" not in line:
            raise Failed(USAGE, "the bench process was given no job")
        done = one_run(Job.from_json(line["job"]), control, clock)
        code = int(done["exit_code"])
        control.writer.send({"done": done})
    except Failed as error:
        code = error.code
        control.writer.send({"failed": {"exit_code": error.code, "reason": str(error)}})
    except Exception as error:
        # A mistake of ours: the drive is off by now (see Loop.run), and the rows are in the journal.
        words = (
            f"an error inside the bench process ({type(error).__name__}: {error}); what was written is kept"
        )
        control.writer.send({"failed": {"exit_code": code, "reason": words}})
    control.writer.close()
    # The reading thread still waits on the client's pipe.
    sys.stderr.flush()
    os._exit(code)
