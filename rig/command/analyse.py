"""`haltere analyse`: everything again from raw rows."""

from __future__ import annotations

import argparse
import json

from rig.command.exits import Exit
from rig.command.seal_check import seal_state
from rig.command.sessions import analyse_session, opened, session_rig
from rig.command.table import summary
from rig.files.rig import read_rig
from rig.shipped import find


def main(words: argparse.Namespace) -> Exit:
    other = read_rig(find(words.rig)) if words.rig else None
    told = []
    for path in words.sessions:
        with opened(path) as session:
            seal_state(session).tell(session)
            result = analyse_session(session, other or session_rig(session))
        if words.json:
            told.append(result.to_json())
        else:
            print(f"{path}\n{summary(result)}\n")
    if words.json:
        print(json.dumps(told[0] if len(told) == 1 else told, indent=2, allow_nan=False))
    return Exit.DONE
