"""`haltere recover`: seal the journal of a run that was cut off."""

from __future__ import annotations

import argparse
from pathlib import Path

from rig.command.exits import CommandError, Exit
from rig.record.errors import Damaged, JournalFailure, NameTaken
from rig.record.records import MAGIC
from rig.record.sealing import seal

#: How an HDF5 file begins (HDF5 File Format Specification, II.A).
SESSION = b"\x89HDF\r\n\x1a\n"


def main(words: argparse.Namespace) -> Exit:
    journal = Path(words.journal)
    if not journal.is_file():
        raise CommandError(f"{journal}: expected a journal, there is no file of that name")
    _refuse_what_is_none(journal)
    out = Path(words.out) if words.out else journal.with_suffix(".h5")
    try:
        recording = seal(journal, out, keep_journal=True)
    except Damaged as error:
        raise CommandError(str(error), Exit.DAMAGED) from None
    except (NameTaken, JournalFailure) as error:
        raise CommandError(str(error)) from None
    rows = len(recording)
    recovery = recording.recovery
    how = "complete" if recovery is None else recovery.account
    print(
        f"{out}: {rows} rows and {len(recording.events)} events from {journal} ({how}); the journal is kept"
    )
    # An end between two records is what a killed run leaves. A record in part is known to be lost; anything else
    # means that bytes changed on the disk.
    if recovery is not None and recovery.torn:
        raise CommandError(f"{journal}: {recording.damage}; all before it is sealed", Exit.DAMAGED)
    if recovery is not None and recovery.damaged:
        raise CommandError(
            f"{journal}: {recording.damage}; what could be read before and behind it is sealed", Exit.DAMAGED
        )
    return Exit.DONE


def _refuse_what_is_none(journal: Path) -> None:
    """Before anything is said of the name of the session: it is often that of the file given by mistake."""
    with journal.open("rb") as file:
        start = file.read(len(MAGIC))
    if start.startswith(SESSION):
        raise CommandError(f"{journal}: expected a journal, this is a session file, sealed already")
