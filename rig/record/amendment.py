"""Write the results of a new analysis into a session file, without ever risking its rows."""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import Any

import h5py

from rig.record import digests
from rig.record.durability import sync_folder
from rig.record.errors import Damaged, JournalFailure
from rig.record.inspection import inspect
from rig.record.refusals import refusal
from rig.record.target import new_session

TEXT = h5py.string_dtype("utf-8")
FINAL = "/results/final"


def write_results(session: Path, results: dict[str, Any], software: str = "") -> None:
    """Replace `/results/final`: all else is copied to another file, which is read back, synced and put in place.

    `software` is what worked them out. Their digest goes with them; no other is touched, so that a damage done
    before still shows. Raises FileNotFoundError, Damaged if it is no session or cannot be read, JournalFailure
    if it cannot be written; the old file then stands as it was.
    """
    text = json.dumps(results, allow_nan=False)
    if not session.is_file():
        raise FileNotFoundError(2, "no such session file", str(session))
    aside = session.with_name(f".{session.name}.part")
    try:
        with _opened(session) as old:
            inspect(old, session)
            # A new file, not a copy changed in place: what HDF5 frees in a file it leaves there half overwritten.
            with new_session(aside) as new:
                _copy(old, new)
                final = new.create_dataset(FINAL, data=text, dtype=TEXT)
                if software:
                    final.attrs["software"] = software
                _carry_digests(old, new, session)
            with h5py.File(aside, "r") as new:
                if _without_final(digests.of_file(new)) != _without_final(digests.of_file(old)):
                    raise OSError(5, "what was read back differs from what was written")
        descriptor = os.open(aside, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
        aside.replace(session)
        sync_folder(session.absolute().parent)
    except (OSError, RuntimeError) as error:
        raise JournalFailure(f"{session} cannot be written: {refusal(error, session)}") from error
    finally:
        aside.unlink(missing_ok=True)


def _opened(session: Path) -> h5py.File:
    try:
        file = h5py.File(session, "r")
    except OSError:
        raise Damaged(f"{session} is not an HDF5 file, or a damaged one") from None
    if "haltere_format" not in file.attrs or "results" not in file:
        file.close()
        raise Damaged(f"{session} is not a Haltere session")
    return file


def _copy(old: h5py.File, new: h5py.File) -> None:
    for name, value in old.attrs.items():
        new.attrs[name] = value
    for name in old:
        if f"/{name}" not in ("/results", digests.PLACE):
            old.copy(name, new)
    results = new.create_group("results")
    for name, value in old["results"].attrs.items():
        results.attrs[name] = value
    for name in old["results"]:
        if name != "final":
            old["results"].copy(name, results)


def _carry_digests(old: h5py.File, new: h5py.File, session: Path) -> None:
    try:
        digests.carry_over(old, new, FINAL)
    except ValueError as error:
        raise Damaged(f"{session} is damaged: {error}") from None


def _without_final(found: dict[str, dict[str, str]]) -> dict[str, dict[str, str]]:
    return {kind: {name: one for name, one in told.items() if name != FINAL} for kind, told in found.items()}
