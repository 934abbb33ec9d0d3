"""A rig file or a protocol that is being edited: its text, where it came from, and how it is kept."""

from __future__ import annotations

import os
import re
import stat
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

from rig.files.lines import LARGEST_BYTES, read_text
from rig.problem import FileProblems
from rig.record.durability import sync_folder
from rig.shipped import find, shipped_files, shipped_folder

RIG, PROTOCOL = "rig", "protocol"
FIRST_LINE = re.compile(r"^\s*haltere_(rig|protocol)\s*=", re.MULTILINE)


class NotOpened(Exception):
    """A file that cannot be opened for editing, in one sentence."""


class NotKept(Exception):
    """A file that was not written, in one sentence; what is on disk is as it was."""


def kind_of(text: str) -> str:
    """ "rig", "protocol", or "" if the text says neither."""
    found = FIRST_LINE.search(text)
    return found.group(1) if found else ""


def shipped_of(kind: str) -> list[str]:
    """Names of the shipped files of a kind."""
    names = []
    for name in shipped_files():
        with suppress(OSError, UnicodeDecodeError):
            if kind_of((shipped_folder() / f"{name}.toml").read_text(encoding="utf-8")) == kind:
                names.append(name)
    return names


def is_shipped(path: Path) -> bool:
    """Whether a path lies in the folder of the shipped files, which are never written."""
    with suppress(OSError):
        return path.resolve().parent == shipped_folder().resolve()
    return False


def opened(source: str, default: str) -> tuple[WrittenFile, str]:
    """The file of a name or path; if it cannot be opened the shipped one called `default`, and the reason."""
    try:
        return WrittenFile.open(source or default), ""
    except NotOpened as error:
        return WrittenFile.open(default), str(error)


def with_plain_ends(text: str) -> str:
    """Text as an editor holds it: lines end in a line feed alone."""
    return text.replace("\r\n", "\n")


@dataclass
class WrittenFile:
    """One file. `text` is what stands in the editor and what a run is given; `kept` is what the disk holds."""

    path: Path
    text: str
    kept: str

    @classmethod
    def open(cls, name_or_path: str | Path) -> WrittenFile:
        """Open the shipped file of that name, or else a path. NotOpened with the reason."""
        shipped = name_or_path in shipped_files()  # also where a file here has the same name
        path = shipped_folder() / f"{name_or_path}.toml" if shipped else find(name_or_path)
        try:
            text = read_text(path)
        except FileProblems as error:
            raise NotOpened(str(error)) from None
        except OSError as error:
            raise NotOpened(f"{path} cannot be read: {error.strerror or error}") from None
        return cls(path.absolute(), text, text)

    @property
    def shipped(self) -> bool:
        return is_shipped(self.path)

    @property
    def name(self) -> str:
        """What it is called in sentences and lists."""
        return self.path.stem if self.shipped else self.path.name

    @property
    def source(self) -> str:
        """What opens it again: the name of a shipped file, else a path."""
        return self.path.stem if self.shipped else str(self.path)

    @property
    def edited(self) -> bool:
        return self.text != self.kept

    def edit(self, text: str) -> None:
        """Take what an editor holds; the file's own line ends stay."""
        if text == with_plain_ends(self.kept):
            self.text = self.kept
            return
        first = self.kept.find("\n")
        crlf = first > 0 and self.kept[first - 1] == "\r"
        self.text = text.replace("\n", "\r\n") if crlf else text

    def changed_on_disk(self) -> bool:
        """Whether the disk holds something else than when it was read or written here; a file gone is no change."""
        try:
            with self.path.open("rb") as file:
                return file.read(LARGEST_BYTES + 1) != self.kept.encode()
        except FileNotFoundError:
            return False
        except OSError:
            return True

    def save(self) -> None:
        """Write it where it came from. NotKept if it is a shipped file, or changed on disk meanwhile."""
        if self.shipped:
            raise NotKept(f"{self.name} comes with Haltere and stays as it is: save it under another name")
        if self.changed_on_disk():
            raise NotKept(
                f"{self.name} has changed on disk since it was opened here and was not written over: "
                "save it under another name, or open it again"
            )
        self._write(self.path)

    def save_as(self, path: str | Path) -> None:
        """Write it to another path, which it then has. NotKept with the reason."""
        place = Path(path).absolute()
        if is_shipped(place):
            raise NotKept(
                f"{place.name} would be among the files that come with Haltere: choose another folder"
            )
        if place == self.path and self.changed_on_disk():
            raise NotKept(
                f"{place.name} has changed on disk since it was opened here: save it under another name"
            )
        if place.is_dir():
            raise NotKept(f"{place} is a folder: give a file name")
        self._write(place)
        self.path = place

    def _write(self, path: Path) -> None:
        """Aside first, then renamed: after a failure the old file is whole."""
        try:
            data = self.text.encode()
        except UnicodeEncodeError:
            raise NotKept(f"{path.name} holds a letter that is no letter in UTF-8: take it out") from None
        target = path.resolve()  # a link stays a link
        aside = target.with_name(f".{target.name[:80]}.{os.getpid()}.part")
        try:
            with aside.open("wb") as file:
                file.write(data)
                file.flush()
                os.fsync(file.fileno())
            with suppress(OSError):
                aside.chmod(stat.S_IMODE(target.stat().st_mode))
            aside.replace(target)
        except OSError as error:
            with suppress(OSError):
                aside.unlink()
            raise NotKept(f"{path} cannot be written: {error.strerror or error}") from None
        sync_folder(target.parent)
        self.kept = self.text
