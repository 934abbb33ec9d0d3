"""`haltere verify`: whether a session is what was recorded."""

from __future__ import annotations

import argparse
import json
from pathlib import Path

from rig.command.exits import CommandError, Exit
from rig.command.sessions import session_rig, software
from rig.verification.verify import sound, verify


def main(words: argparse.Namespace) -> Exit:
    path = Path(words.session)
    try:
        checks = verify(path, software(), session_rig)
    except FileNotFoundError:
        raise CommandError(f"{path}: expected a session file, there is none of that name") from None
    if words.json:
        told = {"session": str(path), "sound": sound(checks), "checks": [check.to_json() for check in checks]}
        print(json.dumps(told, indent=2))
    else:
        for check in checks:
            print(f"{check.outcome:<11}  {check.name:<9}  {check.sentence}")
    return Exit.DONE if sound(checks) else Exit.DAMAGED
