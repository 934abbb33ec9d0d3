"""TOML with the line of every key. `tomllib` reads the values; a scanner of our own finds the lines."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any

from rig.problem import FileProblems, Problem

Path_ = tuple[str | int, ...]
LARGEST_BYTES = 2**20
DEEPEST = 32
KEY = r"""(?:[A-Za-z0-9_-]+|"(?:[^"\\]|\\.)*"|'[^']*')"""
DOTTED = re.compile(rf"\s*({KEY}(?:\s*\.\s*{KEY})*)\s*")
LONG_KEY = re.compile(r"(?:[A-Za-z0-9_-]+\s*\.\s*){200}")
LONG_NUMBER = re.compile(r"[0-9_]{4300,}")
PLACE = re.compile(r"\s*\(at (?:line (\d+), column \d+|end of document)\)")


class Document:
    """Values of a TOML text and the line of each key, by path: ("channel", "body", "zero"), ("step", 3, "to")."""

    def __init__(self, name: str, data: dict[str, Any], lines: dict[Path_, int]) -> None:
        self.name = name
        self.data = data
        self._lines = lines

    def line(self, path: Path_) -> int:
        """Line of a key, or of the nearest table around it; 0 if there is none."""
        while path:
            if path in self._lines:
                return self._lines[path]
            path = path[:-1]
        return 0


def read_text(path: str | Path) -> str:
    """The text of a file somebody wrote. FileProblems if it cannot be TOML; OSError if it cannot be read."""
    place = Path(path)
    name = str(path)

    def refuse(value: str, expected: str, line: int = 0) -> FileProblems:
        return FileProblems([Problem(name, line, "", value, expected)])

    if place.is_dir():
        raise refuse("a folder", "a TOML file")
    if not place.exists():
        raise refuse("", "a file of that name, or the name of a shipped one (see 'haltere about')")
    with place.open("rb") as file:
        # Never more than that: a device file has no size and no end.
        data = file.read(LARGEST_BYTES + 1)
    if len(data) > LARGEST_BYTES:
        raise refuse(f"more than {LARGEST_BYTES} bytes", "a text file below 1 MiB")
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise refuse("UTF-16", "UTF-8 text without a byte-order mark", 1)
    if data.startswith(b"\xef\xbb\xbf"):
        raise refuse("a byte-order mark", "UTF-8 text without one", 1)
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise refuse(f"byte {data[error.start]:#04x}", "UTF-8 text", line) from None


def parse(text: str, name: str) -> Document:
    """Read a TOML text. FileProblems, with the line, if it is not well-formed or a key comes twice."""
    if text.startswith("\ufeff"):
        raise FileProblems([Problem(name, 1, "", "a byte-order mark", "UTF-8 text without one")])
    if (long := LONG_KEY.search(text)) is not None:
        # Its tables would be nested so deep; the library takes minutes to make them.
        line = text.count("\n", 0, long.start()) + 1
        raise FileProblems([Problem(name, line, "", "", f"tables nested at most {DEEPEST} deep")])
    try:
        data = tomllib.loads(text)
    except RecursionError:
        raise FileProblems([Problem(name, 0, "", "", f"tables nested at most {DEEPEST} deep")]) from None
    except ValueError as error:  # TOMLDecodeError, or a whole number too long for Python
        raise FileProblems([_syntax(text, name, str(error))]) from None
    document = Document(name, data, _scan(text))
    deep = _deep(data)
    if deep:
        problem = Problem(name, document.line(deep), "", "", f"tables nested at most {DEEPEST} deep")
        raise FileProblems([problem])
    return document


def _deep(data: dict[str, Any]) -> Path_:
    """Path of a value nested deeper than anything a rig or a protocol needs; empty if there is none."""
    open_: list[tuple[Path_, Any]] = [((), data)]
    while open_:
        path, value = open_.pop()
        if len(path) > DEEPEST:
            return path
        if isinstance(value, dict):
            open_.extend(((*path, key), inner) for key, inner in value.items())
        elif isinstance(value, list):
            open_.extend(((*path, place), inner) for place, inner in enumerate(value))
    return ()


def _syntax(text: str, name: str, message: str) -> Problem:
    found = PLACE.search(message)
    long = LONG_NUMBER.search(text)
    if found is None and long is not None:
        line = text.count("\n", 0, long.start()) + 1
        return Problem(name, line, "", f"{long.group()[:20]}...", "a number of fewer digits")
    line = text.count("\n") + 1 if found is None or found.group(1) is None else int(found.group(1))
    words = PLACE.sub("", message).strip().rstrip(".")
    rows = text.split("\n")
    row = rows[line - 1].strip() if 0 < line <= len(rows) else ""
    if "overwrite" in words or "twice" in words or "declare" in words.lower():
        key = DOTTED.match(row.strip("[] "))
        return Problem(
            name, line, key.group(1) if key else "", "", "a key or table given once; it is there already"
        )
    return Problem(name, line, "", row[:60], f"TOML ({words[:1].lower()}{words[1:]})")


def _scan(text: str) -> dict[Path_, int]:
    """Line of every key and table of a text that `tomllib` has accepted."""
    lines: dict[Path_, int] = {}
    counts: dict[Path_, int] = {}
    table: Path_ = ()
    rows = text.split("\n")  # not splitlines: TOML allows other line separators within a comment or a text
    number = 0
    while number < len(rows):
        row = rows[number]
        number += 1
        bare = row.strip()
        if not bare or bare.startswith("#"):
            continue
        if bare.startswith("[["):
            path = _resolved(_keys(bare[2:]), counts)
            counts[path] = counts.get(path, -1) + 1
            table = (*path, counts[path])
            lines[table] = number
            lines.setdefault(path, number)
        elif bare.startswith("["):
            table = _resolved(_keys(bare[1:]), counts)
            lines[table] = number
        else:
            keys = _keys(bare)
            for end in range(1, len(keys) + 1):
                lines.setdefault((*table, *keys[:end]), number)
            number += _continued(rows, number - 1)
    return lines


def _keys(row: str) -> tuple[str, ...]:
    found = DOTTED.match(row)
    if found is None:
        return ()
    parts = re.findall(KEY, found.group(1))
    return tuple(part[1:-1] if part[0] in "\"'" else part for part in parts)


def _resolved(keys: tuple[str, ...], counts: dict[Path_, int]) -> Path_:
    """A header's path with the index of the present entry of every array of tables on the way."""
    path: Path_ = ()
    for position, key in enumerate(keys):
        path = (*path, key)
        if position < len(keys) - 1 and path in counts:
            path = (*path, counts[path])
    return path


def _continued(rows: list[str], start: int) -> int:
    """How many more rows the value that begins in row `start` takes."""
    depth, quote, row = 0, "", start
    position = rows[row].find("=") + 1
    while True:
        text = rows[row]
        while position < len(text):
            if quote:
                if quote[0] == '"' and text[position] == "\\":
                    position += 2
                    continue
                if text.startswith(quote, position):
                    position += len(quote)
                    quote = ""
                    continue
            elif text[position] == "#":
                break
            elif text.startswith(('"""', "'''"), position):
                quote = text[position : position + 3]
                position += 3
                continue
            elif text[position] in "\"'":
                quote = text[position]
            elif text[position] in "[{":
                depth += 1
            elif text[position] in "]}":
                depth -= 1
            position += 1
        if len(quote) == 1:
            quote = ""
        if (depth <= 0 and not quote) or row + 1 >= len(rows):
            return row - start
        row, position = row + 1, 0
