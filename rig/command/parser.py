"""The command line of `haltere`: which commands there are and which words they take.

Nothing heavy is imported here, so that `haltere --help` and a mistyped command answer at once.
"""

from __future__ import annotations

import argparse
from importlib.metadata import version
from typing import NoReturn

from rig.command.exits import CommandError

COMMANDS = {
    "demo": "run the main job on the simulated boom: staircase up and down with taps, map and report",
    "run": "carry out a protocol on a rig and analyse it while it runs",
    "check": "read a rig file, and a protocol, and tell every mistake; dry run before power",
    "analyse": "estimate everything again from the raw rows of a session",
    "replay": "play a session once more as it ran, and tell whether it comes to the same",
    "verify": "prove that a session is what was recorded, and that its results follow from it",
    "report": "write the report of a session",
    "recover": "seal the journal of a run that was cut off",
    "desk": "open the window: prepare, run and watch, or replay a session",
    "stand-in": "serve a simulated rig in a board's own bytes on a pseudo-terminal or a TCP port",
    "about": "tell versions, serial ports and whether the installation is sound",
}


class Parser(argparse.ArgumentParser):
    """Bad usage ends in one sentence instead of a usage dump."""

    def error(self, message: str) -> NoReturn:
        raise CommandError(f"{message} (try '{self.prog} --help')")


def _tcp_port(text: str) -> int:
    """A TCP port to serve on."""
    if not (text.isascii() and text.isdecimal() and len(text) <= 5 and int(text) <= 65_535):
        raise argparse.ArgumentTypeError(f"{text}: expected a whole number from 0 to 65535")
    return int(text)


def build() -> argparse.ArgumentParser:
    """The parser for all commands; its result has `.command` and the command's own words."""
    parser = Parser(
        prog="haltere",
        description="Find the drive at which a flapping mechanism holds itself by vibration alone.",
        epilog="The software halt is not a safety-rated stop. Exit codes: 0 done; 2 bad usage or file; "
        "3 halted by an interlock or the operator; 4 link or hardware; 5 damaged data.",
    )
    parser.add_argument("--version", action="version", version=f"haltere {version('haltere')}")
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND", parser_class=Parser)
    made = {name: commands.add_parser(name, help=text, description=text) for name, text in COMMANDS.items()}

    demo = made["demo"]
    demo.add_argument("--out", metavar="DIR", default="haltere-demo", help="folder for the results")
    demo.add_argument("--seed", type=int, help="seed of the simulated disturbances (default: the rig file's)")
    demo.add_argument("--quiet", action="store_true", help="no progress on stderr")

    run = made["run"]
    run.add_argument("protocol", metavar="PROTOCOL", help="a protocol file, or the name of a shipped one")
    run.add_argument("--rig", required=True, metavar="RIG", help="a rig file, or the name of a shipped one")
    run.add_argument("--out", metavar="FILE", help="session file (default: RIG-PROTOCOL.h5)")
    run.add_argument("--pace", choices=("fast", "real"), default="fast", help="for simulated rigs")
    run.add_argument("--port", metavar="PORT", help="on the board at this port or socket://HOST:PORT instead")
    run.add_argument("--seed", type=int, help="seed of the simulated disturbances")
    run.add_argument("--acknowledge", metavar="NAME", help="the cautions were read and understood by NAME")
    run.add_argument("--report", metavar="HTML", help="write the report there as well")
    run.add_argument("--keep-journal", action="store_true", help="keep the journal beside the session")
    run.add_argument("--quiet", action="store_true", help="no progress on stderr")

    check = made["check"]
    check.add_argument("rig", metavar="RIG")
    check.add_argument("protocol", metavar="PROTOCOL", nargs="?")

    analyse = made["analyse"]
    analyse.add_argument("sessions", metavar="SESSION", nargs="+")
    analyse.add_argument("--json", action="store_true", help="results as JSON on stdout")
    analyse.add_argument("--rig", metavar="RIG", help="constants from this rig file instead of the session's")

    replay = made["replay"]
    replay.add_argument("session", metavar="SESSION")
    replay.add_argument(
        "--speed",
        type=float,
        metavar="N",
        help="times real time, 0.1 or more (default: as fast as it computes)",
    )
    replay.add_argument("--json", action="store_true", help="results as JSON on stdout")
    replay.add_argument("--desk", action="store_true", help="in the window")
    replay.add_argument("--quiet", action="store_true", help="no progress on stderr")

    verify = made["verify"]
    verify.add_argument("session", metavar="SESSION")
    verify.add_argument("--json", action="store_true", help="the checks as JSON on stdout")

    report = made["report"]
    report.add_argument("session", metavar="SESSION")
    report.add_argument("--out", metavar="HTML", help="default: beside the session")

    recover = made["recover"]
    recover.add_argument("journal", metavar="JOURNAL")
    recover.add_argument("--out", metavar="FILE", help="session file (default: beside the journal)")

    stand_in = made["stand-in"]
    stand_in.add_argument(
        "rig", metavar="RIG", help="a rig file with constants, or the name of a shipped one"
    )
    where = stand_in.add_mutually_exclusive_group()
    where.add_argument(
        "--tcp", metavar="PORT", type=_tcp_port, help="serve on this TCP port of this machine (0: any free)"
    )
    where.add_argument("--link", metavar="PATH", help="name for the pseudo-terminal that stays the same")
    stand_in.add_argument("--seed", type=int, help="seed of the simulated disturbances")
    stand_in.add_argument(
        "--fault",
        metavar="TEXT",
        action="append",
        default=[],
        help="let something go wrong, e.g. 'open_guard at 12 s'; also one a line on standard input",
    )
    stand_in.add_argument(
        "--watchdog", metavar="S", type=float, default=0.2, help="patience of its watchdog (default: 0.2 s)"
    )
    stand_in.add_argument("--log", metavar="FILE", help="what happens at the board, as JSON lines")

    desk = made["desk"]
    desk.add_argument("session", metavar="SESSION", nargs="?", help="a session to replay")

    made["about"].add_argument("--json", action="store_true", help="as JSON on stdout")
    return parser
