"""A run in a bench process, as the command line shows it.

A command that was held up (a stopped terminal, a suspended computer) finds the pipe closed when it goes on. That alone
is no death: what the bench process wrote is read first, and what did not fit into the pipe stands in the session.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

from rig.bench.client import SIGN_OF_LIFE_S, BenchClient
from rig.bench.job import Job
from rig.command.exits import CommandError, Exit
from rig.command.progress import RunProgress
from rig.command.sessions import analyse_session, opened, session_rig
from rig.record.errors import RecordError
from rig.results import SessionResult
from rig.run.interrupt import HaltSignals
from rig.run.loop import RunOutcome
from rig.run.progress import Standing
from rig.verdicts import Verdict, verdict_from_json


def run_on_bench(job: Job, progress: RunProgress) -> tuple[RunOutcome, SessionResult]:
    """Run a job to its end. CommandError, with the sentence and exit code of what went wrong."""
    if job.session.exists():
        raise CommandError(f"{job.session} is there already; choose another name with --out")
    if not job.session.parent.is_dir():
        raise CommandError(f"{job.session.parent} is not a folder")
    progress.say(f"preparing the run on {job.port or job.rig_name} ...")  # some seconds, more the first time
    with HaltSignals() as signals, BenchClient(job) as client:
        done = _follow(client, job, progress, signals)
    path = Path(str(done["session"]))
    with opened(path) as session:
        result = analyse_session(session, session_rig(session))
    return RunOutcome(int(done["exit_code"]), str(done["reason"])), result


def _follow(client: BenchClient, job: Job, progress: RunProgress, signals: HaltSignals) -> dict[str, Any]:
    last = Standing(0, 0, -1, "", 0.0, "")
    time_s = 0.0
    asked = False
    while True:
        client.here()
        if signals.asked and not asked:
            asked = True
            client.input("halt")
            progress.prompt("halted; off does not mean stopped: waiting for standstill")
        line = client.wait(SIGN_OF_LIFE_S)
        if line is None:
            if client.ended:
                return _without_a_word(client, job)
            continue
        verdicts: list[Verdict] = []
        if "failed" in line:
            failed = line["failed"]
            raise CommandError(str(failed["reason"]), Exit(int(failed["exit_code"])))
        if "done" in line:
            done: dict[str, Any] = line["done"]
            return done
        if "prompt" in line:
            progress.prompt(str(line["prompt"]))
        elif "verdict" in line:
            verdicts = [verdict_from_json(line["verdict"])]
        elif "standing" in line:
            time_s, last = float(line["standing"]["time_s"]), Standing(**line["standing"]["standing"])
        if "verdict" in line or "standing" in line:
            progress(time_s, last, verdicts)


def _without_a_word(client: BenchClient, job: Job) -> dict[str, Any]:
    """What is done with a bench process that has gone and told no end; CommandError if it has died.

    Its rows are sealed, if it has not done so itself.
    """
    died = client.process.wait() < 0  # by a signal
    words = "the bench process has died; the board cuts the drive by itself when the heartbeat stops"
    if not job.session.exists():
        if not job.journal.exists():
            raise CommandError(words, Exit.HARDWARE)
        from rig.record.sealing import seal

        try:
            seal(job.journal, job.session, keep_journal=True)
        except RecordError as error:
            raise CommandError(
                f"{words}; {error}; the journal {job.journal} is kept", Exit.HARDWARE
            ) from None
        words = f"{words}; its rows are sealed in {job.session}, the journal is kept"
    finished = None if died else _finished(job.session)
    if finished is None:
        raise CommandError(words, Exit.HARDWARE)
    return {**finished, "session": str(job.session)}


def _finished(path: Path) -> dict[str, Any] | None:
    """How the run of a session ended, by its own last words; None if it was cut off."""
    with opened(path) as session:
        ends = [event.data for event in session.events if event.kind == "finished"]
    return ends[-1] if ends else None
