"""`haltere report`: the report of a session, estimated again from raw rows."""

from __future__ import annotations

import argparse
from pathlib import Path

from rig.command.exits import CommandError, Exit
from rig.command.seal_check import seal_state
from rig.command.sessions import analyse_session, opened, report_session, session_rig


def main(words: argparse.Namespace) -> Exit:
    out = Path(words.out) if words.out else Path(words.session).with_suffix(".html")
    if out.resolve() == Path(words.session).resolve():
        raise CommandError(f"--out {out}: expected another file than the session itself")
    with opened(words.session) as session:
        state = seal_state(session)
        state.tell(session)
        rig = session_rig(session)
        report_session(session, rig, analyse_session(session, rig), out, state)
    print(out)
    return Exit.DONE
