"""Why the operating system refused to write a file, in words for whoever asked for it.

HDF5 hides the reason in texts of its own, over several lines with pointers and times, or tells it as a RuntimeError;
the number of the error stands in them. This is the one place where it is read.
"""

from __future__ import annotations

import errno
import os
import re
from pathlib import Path

NUMBER = re.compile(r"errno ?=? ?(\d+)", re.IGNORECASE)


def refusal(error: BaseException, path: Path) -> str:
    """The end of a sentence that begins with the file: "no space is left on the disk of tm2"."""
    folder = path.parent
    number = error_number(error)
    if not folder.is_dir():
        return f"{folder} is not a folder"
    if number in (errno.ENOSPC, errno.EDQUOT):
        return f"no space is left on the disk of {_name(folder)}"
    if number in (errno.EACCES, errno.EPERM, errno.EROFS):
        return f"nothing may be written into {_name(folder)}"
    if number == errno.EISDIR or path.is_dir():
        return "it is a folder"
    if number == errno.EIO:
        return f"the disk of {_name(folder)} reports an error"
    if number:
        return os.strerror(number).lower()
    # Without a number the sentence is ours, or all there is: its first line, without HDF5's list of details.
    told = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
    return told.split("\n")[0].split("(")[0].strip() or type(error).__name__


def error_number(error: BaseException) -> int:
    """The number of the error, 0 where none is told."""
    if isinstance(error, OSError) and error.errno:
        return error.errno
    found = NUMBER.search(str(error))
    return int(found.group(1)) if found else 0


def _name(folder: Path) -> str:
    """The folder as it was given; the one worked in has no name in a path like "s1.h5"."""
    return str(folder) if str(folder) != "." else "this folder"
