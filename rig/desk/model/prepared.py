"""A run that is being prepared: two files, where it is to run, where its session goes, and what is still missing."""

from __future__ import annotations

import os
import re
from dataclasses import dataclass, field
from pathlib import Path
from urllib.parse import urlsplit

from platformdirs import user_documents_path

from rig.bench.job import Job
from rig.desk.model.checked import Checked, check
from rig.desk.model.written_file import NotKept, NotOpened, WrittenFile
from rig.run.cautions import Acknowledgement

ENDINGS = (".h5", ".hdf5")
LONGEST_PART = 80  # bytes of a name; a file name of 255 holds two and the date
FIRST_RIG, FIRST_PROTOCOL = "boom", "quick"


def stamp(utc_text: str) -> str:
    """The date of a record as it stands in file names: "2025-03-01T09:05:07+00:00" gives "20250301-090507"."""
    digits = re.sub(r"\D", "", utc_text[:19])
    return f"{digits[:8]}-{digits[8:14]}"


def session_name(rig_name: str, protocol_name: str, utc_text: str) -> str:
    """RIG-PROTOCOL-DATE.h5, short enough for a file system."""
    parts = (_part(rig_name, "rig"), _part(protocol_name, "protocol"), stamp(utc_text))
    return "-".join(parts) + ".h5"


def _part(name: str, default: str) -> str:
    plain = re.sub(r"[^\w.+-]+", "-", name).strip("-. ")
    return plain.encode()[:LONGEST_PART].decode(errors="ignore") or default


def session_folder(remembered: str) -> Path:
    """Where sessions go: where the last one went, else the documents of the user."""
    if remembered and Path(remembered).is_dir():
        return Path(remembered)
    documents = user_documents_path()
    return documents if documents.is_dir() else Path.home()


def free_name(folder: Path, name: str) -> str:
    """The name, or one with a number behind it that no session and no journal has."""
    stem, ending = Path(name).stem, Path(name).suffix
    number, found = 2, name
    while (folder / found).exists() or (folder / found).with_suffix(".journal").exists():
        found = f"{stem}-{number}{ending}"
        number += 1
    return found


def session_problem(path: Path) -> str:
    """What is wrong with a path for a new session; "" if nothing is."""
    if path.suffix.lower() not in ENDINGS or path.name.lower() in ENDINGS:
        return "The session needs a file name that ends in .h5."
    if not path.name.isprintable():
        return "The session cannot have this name: it holds a letter that cannot be shown."
    try:
        if not path.parent.is_dir():
            return f"The folder of the session is not there: {path.parent}"
        if path.exists() or path.is_symlink():
            return f"{path.name} is there already: choose another name for the session."
        journal = path.with_suffix(".journal")
        if journal.exists():
            return f"{journal.name}, the journal of an earlier run, is still there: choose another name."
        if not os.access(path.parent, os.W_OK):
            return f"Nothing may be written in the folder of the session, {path.parent}"
    except (OSError, ValueError) as error:  # a name that is too long, or holds a zero byte
        words = (error.strerror if isinstance(error, OSError) else "") or str(error)
        return f"The session cannot have this name: {words}"
    return ""


def address_problem(address: str) -> str:
    """What is wrong with the address of a board, as far as it can be told without opening it."""
    if not address.strip():
        return 'The address of the board is not given: a port like "/dev/ttyACM0", or socket://HOST:PORT.'
    if "://" in address:
        try:
            parts = urlsplit(address)
            whole = parts.scheme == "socket" and bool(parts.hostname) and parts.port is not None
        except ValueError:
            whole = False
        if not whole:
            return f"{address} is no address of a board: expected socket://HOST:PORT."
    return ""


@dataclass
class Prepared:
    """What is to be run. `generation` grows with every change, so that a check that comes late is known to be old."""

    rig: WrittenFile
    protocol: WrittenFile
    folder: Path
    by_port: bool = False  # else where the rig file says
    port: str = ""
    session_typed: str = ""  # "": a name is made for it
    generation: int = 0
    checked: Checked | None = field(default=None, repr=False)

    def changed(self) -> int:
        """Something was edited or opened: what was checked is about other texts. The new generation."""
        self.generation += 1
        self.checked = None
        return self.generation

    def question(self) -> tuple[str, str, str, str]:
        """What `check` is to be asked."""
        return self.rig.text, self.rig.name, self.protocol.text, self.protocol.name

    def check(self) -> Checked:
        """Check here and now; for callers without a window to keep alive."""
        self.checked = check(*self.question())
        return self.checked

    def take(self, generation: int, checked: Checked) -> bool:
        """A check has come to its end; False if it is about texts that are no more."""
        if generation != self.generation:
            return False
        self.checked = checked
        return True

    # -- what follows ----------------------------------------------------------------------------------

    @property
    def powered(self) -> bool:
        """Whether arming switches a real drive on; True where that cannot be told."""
        if self.by_port:
            return True
        rig = self.checked.rig if self.checked is not None else None
        return rig is None or not rig.simulated

    @property
    def rig_sha256(self) -> str:
        """Of the rig file as checked; "" while it is not good."""
        rig = self.checked.rig if self.checked is not None else None
        return rig.sha256 if rig is not None else ""

    def default_session(self, utc_text: str) -> str:
        """A name for the session that is not taken."""
        rig = self.checked.rig if self.checked is not None else None
        protocol = self.checked.protocol if self.checked is not None else None
        rig_name = rig.name if rig is not None else self.rig.path.stem
        protocol_name = protocol.name if protocol is not None else self.protocol.path.stem
        return free_name(self.folder, session_name(rig_name, protocol_name, utc_text))

    def session(self, utc_text: str) -> Path:
        """Where the session goes."""
        return self.folder / (self.session_typed.strip() or self.default_session(utc_text))

    def place_problem(self) -> str:
        """What is wrong with where it is to run; "" if nothing is."""
        if self.by_port:
            return address_problem(self.port)
        rig = self.checked.rig if self.checked is not None else None
        if rig is not None and rig.driver == "none":
            return 'The rig file describes no bench (driver = "none"): choose the port of a board.'
        return ""

    def missing(self, utc_text: str, acknowledged: Acknowledgement | None, *, although: bool) -> list[str]:
        """What must be done before arming, a sentence each; nothing: it may be armed.

        `although`: the operator wants to run although limits would be crossed, which still trip.
        """
        checked = self.checked
        if checked is None:
            return ["The files are being checked."]
        told = []
        if checked.problem_count:
            count = checked.problem_count
            told.append(f"{count} mistake{'s' if count > 1 else ''} in the files.")
        elif checked.crossings and not although:
            told.append(
                "The dry run would cross a limit: change the files, or tick that it is to run although."
            )
        if self.place_problem():
            told.append(self.place_problem())
        if self.rig_sha256 and self.powered and acknowledged is None:
            told.append("Nobody has acknowledged the cautions for this rig file in this shift.")
        if Path(self.session_typed.strip()).name != self.session_typed.strip():
            told.append("The session needs a name without a folder; the folder is chosen beside it.")
        elif session_problem(self.session(utc_text)):
            told.append(session_problem(self.session(utc_text)))
        return told

    def job(
        self,
        utc_text: str,
        utc_s: float,
        *,
        software: str,
        state_folder: str,
        acknowledged_by: str = "",
        ring: str = "",
    ) -> Job:
        """The run as the bench process is asked for it."""
        return Job(
            rig_text=self.rig.text,
            rig_name=self.rig.name,
            protocol_text=self.protocol.text,
            protocol_name=self.protocol.name,
            out=str(self.session(utc_text).absolute()),
            port=self.port.strip() if self.by_port else "",
            acknowledged_by=acknowledged_by,
            created_utc=utc_text,
            created_utc_s=utc_s,
            software=software,
            pictures=True,
            may_go_on=True,
            ring=ring,
            state_folder=state_folder,
        )


__all__ = ["Checked", "NotKept", "NotOpened", "Prepared", "WrittenFile", "check"]
