"""Write the results of a new analysis into a session file, without ever risking its rows."""

from __future__ import annotations

import json
import os
import shutil
from pathlib import Path
from typing import Any

import h5py

from rig.record import digests
from rig.record.durability import sync_folder
from rig.record.errors import Damaged, JournalFailure

TEXT = h5py.string_dtype("utf-8")
FINAL = "/results/final"


def write_results(session: Path, results: dict[str, Any], software: str = "") -> None:
    """Replace `/results/final`: a copy is changed, synced and put in the place of the file.

    `software` is what worked them out. Their digest goes with them; no other is touched, so that a damage done
    before still shows.

    Raises FileNotFoundError, Damaged if it is no session, JournalFailure if it cannot be written; the old file
    then stands as it was.
    """
    text = json.dumps(results, allow_nan=False)
    if not session.is_file():
        raise FileNotFoundError(2, "no such session file", str(session))
    aside = session.with_name(f".{session.name}.part")
    try:
        shutil.copyfile(session, aside)
        with h5py.File(aside, "r+", libver=("v110", "v110")) as file:
            if "haltere_format" not in file.attrs or "results" not in file:
                raise Damaged(f"{session} is not a Haltere session")
            if FINAL in file:
                del file[FINAL]
            final = file.create_dataset(FINAL, data=text, dtype=TEXT)
            if software:
                final.attrs["software"] = software
            try:
                digests.refresh(file, FINAL)
            except ValueError as error:
                raise Damaged(f"{session} is damaged: {error}") from None
        descriptor = os.open(aside, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
        aside.replace(session)
        sync_folder(session.absolute().parent)
    except (OSError, RuntimeError) as error:
        if isinstance(error, OSError) and error.errno is None:
            raise Damaged(f"{session} is not an HDF5 file, or a damaged one") from None
        raise JournalFailure(f"{session} cannot be written: {error}") from error
    finally:
        aside.unlink(missing_ok=True)
