"""`haltere recover`: seal the journal of a run that was cut off."""

from __future__ import annotations

import argparse
from pathlib import Path

from rig.command.exits import CommandError, Exit
from rig.record.errors import Damaged, JournalFailure, NameTaken
from rig.record.sealing import seal


def main(words: argparse.Namespace) -> Exit:
    journal = Path(words.journal)
    if not journal.is_file():
        raise CommandError(f"{journal}: expected a journal, there is no file of that name")
    out = Path(words.out) if words.out else journal.with_suffix(".h5")
    try:
        recording = seal(journal, out, keep_journal=True)
    except Damaged as error:
        raise CommandError(str(error), Exit.DAMAGED) from None
    except NameTaken as error:
        raise CommandError(str(error)) from None
    except JournalFailure as error:
        raise CommandError(str(error), Exit.HALTED) from None
    rows = len(recording)
    how = "complete" if recording.ended else recording.damage or "it ends without an end record"
    print(
        f"{out}: {rows} rows and {len(recording.events)} events from {journal} ({how}); the journal is kept"
    )
    # A cut at the end is what a crash leaves; damage before it means that bytes changed on the disk.
    harmless = recording.ended or not recording.damage or recording.damage.startswith("cut off")
    if not harmless:
        raise CommandError(f"{journal}: {recording.damage}; what stood before it is sealed", Exit.DAMAGED)
    return Exit.DONE
