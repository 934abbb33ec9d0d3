"""`haltere run`: a protocol on a rig, headless."""

from __future__ import annotations

import argparse
import sys
from dataclasses import replace
from pathlib import Path

from drivers.clock import VirtualClock
from drivers.ports import malformed
from rig.bench.job import Job
from rig.command.bench_run import run_on_bench
from rig.command.exits import CommandError, Exit
from rig.command.moment import utc_s, utc_text
from rig.command.progress import RunProgress
from rig.command.sessions import opened, report_session, run_session, software, with_seed
from rig.command.state_folder import state_folder
from rig.command.table import sampler_losses, summary
from rig.description import RigDescription
from rig.files import read_pair
from rig.files.forecast import forecast
from rig.results import SessionResult
from rig.run.loop import RunOutcome
from rig.shipped import find
from rig.steps import Protocol


def main(words: argparse.Namespace) -> Exit:
    rig, protocol = read_pair(find(words.rig), find(words.protocol))
    rig = with_seed(rig, words.seed)
    in_process = rig.simulated and not words.port and words.pace == "fast"
    powered = bool(words.port) or not rig.simulated
    if words.port is not None and not words.port.strip():
        raise CommandError("--port has no words: expected a serial device or socket://HOST:PORT")
    if powered and (wrong := malformed(words.port or rig.port)):
        raise CommandError(wrong)
    if powered and not words.acknowledge:
        raise CommandError("a powered rig needs --acknowledge NAME: the cautions must be read and understood")
    out = Path(words.out) if words.out else Path(f"{rig.name}-{protocol.name}.h5")
    report = Path(words.report) if words.report else None
    if report is not None and report.exists():
        raise CommandError(f"{report} is there already; choose another name with --report")
    if not words.quiet:
        show_cautions(powered, words.port or rig.name)
    with RunProgress(forecast(rig, protocol).duration_s, quiet=words.quiet) as progress:
        if in_process:
            outcome, result = run_session(
                rig,
                protocol,
                out,
                VirtualClock(),
                pace="fast",
                progress=progress,
                operator=progress,
                acknowledged_by=words.acknowledge or "",
                keep_journal=words.keep_journal,
            )
        else:
            outcome, result = run_on_bench(_job(words, rig, protocol, out), progress)
    print(summary(told_once(result, outcome)))
    if not in_process:  # where time is simulated no sampler is read
        with opened(out) as file:
            lost = {name: rows.damaged_lines for name, rows in file.samplers.items()}
        for line in sampler_losses(lost):
            print(line)
    if report is not None:
        with opened(out) as file:
            report_session(file, rig, result, report)
    print(f"\nsession: {out}" + (f", report: {report}" if report is not None else ""))
    return told(outcome)


def told_once(result: SessionResult, outcome: RunOutcome) -> SessionResult:
    """The results without the remark on why the run was halted: its sentence comes last of all, from `told`."""
    if not outcome.exit_code:
        return result
    return replace(
        result, remarks=tuple(one for one in result.remarks if not one.endswith(f": {outcome.reason}"))
    )


def told(outcome: RunOutcome) -> Exit:
    if outcome.exit_code:
        raise CommandError(outcome.reason, Exit(outcome.exit_code))
    return Exit.DONE


def _job(words: argparse.Namespace, rig: RigDescription, protocol: Protocol, out: Path) -> Job:
    return Job(
        rig_text=rig.text,
        rig_name=str(words.rig),
        protocol_text=protocol.text,
        protocol_name=str(words.protocol),
        out=str(out.absolute()),
        port=words.port or "",
        seed=words.seed,
        acknowledged_by=words.acknowledge or "",
        created_utc=utc_text(),
        created_utc_s=utc_s(),
        software=software(),
        keep_journal=words.keep_journal,
        state_folder=state_folder(),
    )


def show_cautions(powered: bool, where: str) -> None:
    """The cautions before every run; a simulated one is told from a powered one."""
    from rig.run.cautions import CAUTIONS

    print("Cautions for a powered bench:", file=sys.stderr)
    for caution in CAUTIONS:
        print(f"  - {caution}", file=sys.stderr)
    if not powered:
        print(f"This run is simulated ({where}): nothing is powered.", file=sys.stderr)
