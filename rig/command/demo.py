"""`haltere demo`: the main job on the simulated boom, from rig file to stability map and report."""

from __future__ import annotations

import argparse
import shutil
from pathlib import Path

from drivers.clock import VirtualClock
from rig.command.exits import CommandError, Exit
from rig.command.progress import RunProgress
from rig.command.run import show_cautions, told_once
from rig.command.sessions import journal_beside, opened, report_session, run_session, with_seed
from rig.command.table import summary
from rig.files.forecast import forecast
from rig.files.protocol import read_protocol
from rig.files.rig import read_rig
from rig.shipped import find

RIG, PROTOCOL = "boom", "first-sweep"


def main(words: argparse.Namespace) -> Exit:
    rig = with_seed(read_rig(find(RIG)), words.seed)
    protocol = read_protocol(find(PROTOCOL), rig)
    folder = Path(words.out)
    session, report = folder / "session.h5", folder / "report.html"
    if folder.exists() and not folder.is_dir():
        raise CommandError(f"--out {folder}: expected a folder, this is a file")
    folder.mkdir(parents=True, exist_ok=True)
    _make_room(session, report, protocol.sha256)
    duration_s = forecast(rig, protocol).duration_s
    if not words.quiet:
        show_cautions(False, rig.name)
    with RunProgress(duration_s, quiet=words.quiet) as progress:
        outcome, result = run_session(
            rig, protocol, session, VirtualClock(), pace="fast", progress=progress, operator=progress
        )
    with opened(session) as file:
        report_session(file, rig, result, report)
        bench_s = float(file.streams["board"].time_s[-1])
    print(summary(told_once(result, outcome)))
    print(f"\n{bench_s:.0f} s of bench time in {session}, the report in {report}")
    if outcome.exit_code:
        raise CommandError(outcome.reason, Exit(outcome.exit_code))
    return Exit.DONE


def _make_room(session: Path, report: Path, protocol_sha256: str) -> None:
    """An earlier demo makes room for a new one; nothing else is ever replaced."""
    import hashlib

    if session.exists():
        with opened(session) as file:
            same = hashlib.sha256(file.protocol_text.encode()).hexdigest() == protocol_sha256
            demo = same and file.header.get("bench", {}).get("firmware") == "simulated in process"
        if not demo:
            raise CommandError(f"{session} is there already and is no demo: choose another folder with --out")
        session.unlink()
        report.unlink(missing_ok=True)
    journal = journal_beside(session)
    if journal.exists():
        aside = journal.with_name("cut-off.journal")
        if aside.exists():
            raise CommandError(f"{journal} and {aside} are there already: recover or remove them")
        shutil.move(journal, aside)
