"""`haltere run`: a protocol on a rig, headless."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from drivers.clock import Clock, HostClock, VirtualClock
from rig.command.exits import CommandError, Exit
from rig.command.progress import RunProgress
from rig.command.sessions import opened, report_session, run_session, with_seed
from rig.command.table import summary
from rig.description import RigDescription
from rig.files import read_pair
from rig.files.forecast import forecast
from rig.shipped import find


def main(words: argparse.Namespace) -> Exit:
    rig, protocol = read_pair(find(words.rig), find(words.protocol))
    rig = with_seed(rig, words.seed)
    if not rig.simulated and not words.acknowledge:
        raise CommandError("a powered rig needs --acknowledge NAME: the cautions must be read and understood")
    out = Path(words.out) if words.out else Path(f"{rig.name}-{protocol.name}.h5")
    report = Path(words.report) if words.report else None
    if report is not None and report.exists():
        raise CommandError(f"{report} is there already; choose another name with --report")
    clock: Clock = HostClock() if words.pace == "real" or not rig.simulated else VirtualClock()
    if not words.quiet:
        show_cautions(rig)
    with RunProgress(forecast(rig, protocol).duration_s, quiet=words.quiet) as progress:
        outcome, result = run_session(
            rig,
            protocol,
            out,
            clock,
            pace=words.pace,
            progress=progress,
            operator=progress,
            acknowledged_by=words.acknowledge or "",
            keep_journal=words.keep_journal,
        )
    print(summary(result))
    if report is not None:
        with opened(out) as file:
            report_session(file, rig, result, report)
    print(f"\nsession: {out}" + (f", report: {report}" if report is not None else ""))
    if outcome.exit_code:
        raise CommandError(outcome.reason, Exit(outcome.exit_code))
    return Exit.DONE


def show_cautions(rig: RigDescription) -> None:
    """The cautions before every run; a simulated one is told from a powered one."""
    from rig.run.cautions import CAUTIONS

    print("Cautions for a powered bench:", file=sys.stderr)
    for caution in CAUTIONS:
        print(f"  - {caution}", file=sys.stderr)
    if rig.simulated:
        print(f"This run is simulated ({rig.name}): nothing is powered.", file=sys.stderr)
