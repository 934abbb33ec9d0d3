"""Who has acknowledged the cautions, for which rig file and until when; kept from one window to the next."""

from __future__ import annotations

import json
import math
from contextlib import suppress
from pathlib import Path

from rig.run.cautions import VALID_S, Acknowledgement

LONGEST_NAME = 80


def cleaned(name: str) -> str:
    """A name as it is stored: one line, no blanks around it; "" if it says nothing."""
    return " ".join("".join(letter if letter.isprintable() else " " for letter in name).split())[
        :LONGEST_NAME
    ]


class Acknowledgements:
    """Kept as JSON at `path`. A file that is damaged or absent means that nobody has acknowledged anything.

    Times are s since the epoch, UTC, and come from the caller.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self._made = _read(path)

    def holding(self, rig_sha256: str, utc_s: float) -> Acknowledgement | None:
        """The latest that covers a run on this rig now."""
        good = [made for made in self._made if made.holds(rig_sha256, utc_s)]
        return max(good, key=lambda made: made.utc_s, default=None)

    def acknowledge(self, name: str, rig_sha256: str, utc_s: float) -> Acknowledgement:
        """Note that `name` has read and understood the cautions. ValueError for a name that says nothing.

        It holds in this window even if it cannot be written to the disk.
        """
        who = cleaned(name)
        if not who:
            raise ValueError("the cautions are acknowledged by name")
        made = Acknowledgement(who, rig_sha256, utc_s)
        self._made = [one for one in self._made if one.rig_sha256 != rig_sha256 and _young(one, utc_s)]
        self._made.append(made)
        self._write()
        return made

    def withdraw(self, rig_sha256: str) -> None:
        """Somebody else takes over: nobody has acknowledged them for this rig any more."""
        self._made = [one for one in self._made if one.rig_sha256 != rig_sha256]
        self._write()

    def _write(self) -> None:
        rows = [{"name": one.name, "rig_sha256": one.rig_sha256, "utc_s": one.utc_s} for one in self._made]
        aside = self._path.with_suffix(".part")
        with suppress(OSError):
            self._path.parent.mkdir(parents=True, exist_ok=True)
            aside.write_text(json.dumps(rows), encoding="utf-8")
            aside.replace(self._path)


def _young(one: Acknowledgement, utc_s: float) -> bool:
    return 0.0 <= utc_s - one.utc_s <= VALID_S


def _read(path: Path) -> list[Acknowledgement]:
    made: list[Acknowledgement] = []
    try:
        rows = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError):
        return made
    for row in rows if isinstance(rows, list) else []:
        if not isinstance(row, dict):
            continue
        name, sha256, utc_s = row.get("name"), row.get("rig_sha256"), row.get("utc_s")
        if not (isinstance(name, str) and isinstance(sha256, str) and isinstance(utc_s, int | float)):
            continue
        if cleaned(name) and sha256 and math.isfinite(utc_s):
            made.append(Acknowledgement(cleaned(name), sha256, float(utc_s)))
    return made
