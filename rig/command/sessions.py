"""What several commands do with a session: run one, analyse one, write its report."""

from __future__ import annotations

import hashlib
import sys
from collections.abc import Callable, Sequence
from dataclasses import replace
from importlib.metadata import version
from pathlib import Path

from drivers.clock import Clock
from drivers.errors import BenchError
from drivers.rows import RowBlock
from rig.command.exits import CommandError, Exit
from rig.command.moment import utc_text
from rig.command.seal_check import SealState
from rig.description import RigDescription
from rig.evaluation.analyst import Analyst
from rig.events import Event
from rig.record.errors import Damaged, JournalFailure, NameTaken
from rig.record.journal import JournalWriter
from rig.record.sealing import seal
from rig.results import SessionResult
from rig.run.header import run_header
from rig.run.loop import Loop, Operator, Progress, RunOutcome
from rig.session import Session, open_session
from rig.steps import Protocol
from rig.verdicts import Verdict, verdict_to_json


def software() -> str:
    return f"haltere {version('haltere')}"


def journal_beside(session: Path) -> Path:
    """Where the journal of a session lies while the run is on."""
    return session.with_suffix(".journal")


def with_seed(rig: RigDescription, seed: int | None) -> RigDescription:
    """The rig with another seed of its simulated disturbances."""
    if seed is None or rig.world is None:
        return rig
    if not 0 <= seed < 2**31:
        raise CommandError(f"--seed {seed}: expected a whole number from 0 to {2**31 - 1}")
    return replace(rig, world=replace(rig.world, seed=seed))


class JournalledAnalyst:
    """An analyst whose verdicts are written down as they are told."""

    def __init__(self, analyst: Analyst, journal: JournalWriter) -> None:
        self._analyst = analyst
        self._journal = journal

    def feed(self, blocks: Sequence[RowBlock], events: Sequence[Event]) -> list[Verdict]:
        verdicts = self._analyst.feed(blocks, events)
        for verdict in verdicts:
            self._journal.result({"which": "live", **verdict_to_json(verdict)})
        return verdicts


def run_session(
    rig: RigDescription,
    protocol: Protocol,
    out: Path,
    clock: Clock,
    *,
    pace: str,
    progress: Progress | None = None,
    operator: Operator | None = None,
    acknowledged_by: str = "",
    keep_journal: bool = False,
    started: Callable[[], None] | None = None,
) -> tuple[RunOutcome, SessionResult]:
    """Run a protocol and seal the session at `out`; the journal lies beside it until then.

    Raises CommandError (name taken, disk full, no bench). A run that was halted is sealed all the same.
    """
    from rig.bench_source import bench_for

    if out.exists():
        raise CommandError(f"{out} is there already; choose another name with --out")
    if not out.parent.is_dir():
        raise CommandError(f"{out.parent} is not a folder")
    try:
        bench = bench_for(rig, clock)
        hello = bench.open()
    except BenchError as error:
        raise CommandError(str(error), Exit.HARDWARE) from None
    header = run_header(
        rig,
        protocol,
        hello,
        created_utc=utc_text(),
        software=software(),
        pace=pace,
        acknowledged_by=acknowledged_by,
    )
    try:
        journal = JournalWriter(journal_beside(out), header, reserve_bytes=rig.limits.disk_reserve_bytes)
    except (NameTaken, JournalFailure) as error:
        bench.close()
        raise CommandError(str(error)) from None
    if started is not None:
        started()
    analyst = Analyst(rig, hello.channels, hello.tick_hz)
    told = JournalledAnalyst(analyst, journal)
    ended = False
    try:
        outcome = Loop(
            bench, hello, rig, protocol, journal, told, clock, progress, operator, by=acknowledged_by
        ).run()
        bench.close()
        result = analyst.finish()
        try:
            journal.result({"which": "final", **result.to_json()})
            ended = True
        except JournalFailure as error:
            outcome = replace(outcome, exit_code=outcome.exit_code or int(Exit.HALTED), reason=str(error))
    finally:
        bench.close()
        try:
            journal.close(ended=ended)
        except JournalFailure as error:
            print(f"haltere: {error}", file=sys.stderr)
    try:
        seal(journal_beside(out), out, keep_journal=keep_journal)
    except (NameTaken, JournalFailure, Damaged) as error:
        raise CommandError(f"{error}; the journal {journal_beside(out)} is kept", Exit.HALTED) from None
    return outcome, result


def opened(path: str | Path) -> Session:
    """Open a session file for a command."""
    try:
        return open_session(path)
    except FileNotFoundError:
        raise CommandError(f"{path}: expected a session file, there is none of that name") from None
    except Damaged as error:
        raise CommandError(str(error), Exit.DAMAGED) from None


def session_rig(session: Session) -> RigDescription:
    """The rig of a session, with the seed it ran with."""
    rig = session.rig
    if session.header.get("driver") == "board":  # its file may describe a simulated rig: a stand-in's
        rig = replace(rig, driver="board", port=str(session.header.get("port", "")))
    seed = session.header.get("seed")
    return with_seed(rig, int(seed) if seed is not None else None)


def analyse_session(session: Session, rig: RigDescription) -> SessionResult:
    """Estimate everything again from raw rows and events, with the code that analyses a live run."""
    board = session.streams.get("board")
    if board is None:
        raise CommandError(f"{session.path}: expected a stream /streams/board, there is none", Exit.DAMAGED)
    analyst = Analyst(rig, board.channels, board.tick_hz)
    analyst.feed(list(board.blocks(10_000)), session.events)
    analyst.store.lost_rows = sum(row[1] for row in session.losses)
    analyst.store.lost_frames = sum(row[2] for row in session.losses)
    return analyst.finish()


def report_session(
    session: Session, rig: RigDescription, result: SessionResult, out: Path, state: SealState | None = None
) -> None:
    """Write the report of a session; `state` is how it compares with its digests, None for one just sealed."""
    from rig.report import Provenance, averaged_curve, fitted_curve, write_report

    digest = hashlib.sha256(session.path.read_bytes()).hexdigest()
    provenance = Provenance(
        session_name=session.path.name,
        session_sha256=digest,
        created_utc=session.created_utc,
        analysed_utc=utc_text(),
        acknowledged_by=str(session.header.get("acknowledged_by", "")),
        pace=str(session.header.get("pace", "")),
        firmware=str(session.header.get("bench", {}).get("firmware", "")),
        software={"haltere": software(), **_libraries()},
        changed=state.changed if state is not None else "",
        recovered=session.recovered.sentence if session.recovered is not None else "",
    )
    write_report(
        out,
        rig=rig,
        protocol=session.protocol,
        result=result,
        streams=session.streams["board"],
        events=session.events,
        provenance=provenance,
        theory=averaged_curve(rig, result),
        fit=fitted_curve(result),
    )


def _libraries() -> dict[str, str]:
    return {name: version(name) for name in ("numpy", "scipy", "numba", "h5py")}
