"""`haltere desk`: the window."""

from __future__ import annotations

import argparse
from pathlib import Path

from rig.command.exits import CommandError, Exit


def main(words: argparse.Namespace) -> Exit:
    session = Path(words.session) if words.session else None
    if session is not None and not session.is_file():
        raise CommandError(f"{session}: expected a session file, there is none of that name")
    return show(session)


def show(session: Path | None = None) -> Exit:
    """Open the window, on a session if one is given. CommandError where there is no screen or no toolkit."""
    try:
        from rig.desk.entry import run
    except ImportError as error:
        raise CommandError(
            f"the window cannot be opened ({error}); install the Qt libraries of your system, see README.md"
        ) from None
    return Exit(run(session))
