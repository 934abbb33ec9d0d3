"""Reading one table of a file: typed look-ups that collect mistakes instead of raising them."""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Sequence
from typing import Any

from rig.files import quantity
from rig.files.lines import Document, Path_
from rig.files.quantity import Quantity
from rig.problem import Problem

NAME = re.compile(r"[^\W_][\w .+-]{0,59}")


def shown(value: object) -> str:
    """A value as it stands in the file, shortened."""
    match value:
        case str():
            text = f'"{value}"'
        case bool():
            text = str(value).lower()
        case int():
            text = str(value) if abs(value) < 10**60 else "a number of more than 60 digits"
        case dict():
            text = "a table"
        case _:
            try:
                text = str(value)
            except ValueError:  # a list with a whole number too long to be told in decimal
                text = "a list"
    return text if len(text) <= 60 else text[:57] + "..."


class Table:
    """One table; every key that is asked for is known, the rest is told by `finish`."""

    def __init__(self, document: Document, path: Path_, data: object, problems: list[Problem]) -> None:
        self.document = document
        self.path = path
        self.problems = problems
        self._asked: set[str] = set()
        if not isinstance(data, dict):
            self.wrong("", data, "a table")
            data = {}
        self.data: dict[str, Any] = data

    def __contains__(self, key: str) -> bool:
        return key in self.data

    def wrong(self, key: str, value: object, expected: str) -> None:
        """Note a mistake at a key of this table ("": the table itself; value None: it is missing)."""
        path = (*self.path, key) if key else self.path
        name = ".".join(str(part) for part in path)
        text = "" if value is None else shown(value)
        self.problems.append(Problem(self.document.name, self.document.line(path), name, text, expected))

    def know(self, key: str) -> None:
        """Take a key as known; the caller reads it in its own way."""
        self._asked.add(key)

    def line(self, key: str = "") -> int:
        return self.document.line((*self.path, key) if key else self.path)

    def table(self, key: str) -> Table | None:
        """A table inside this one; None if it is not there."""
        self._asked.add(key)
        return (
            Table(self.document, (*self.path, key), self.data[key], self.problems)
            if key in self.data
            else None
        )

    def _value(self, key: str, required: str) -> Any:
        self._asked.add(key)
        if key not in self.data:
            if required:
                self.wrong(key, None, required)
            return None
        return self.data[key]

    def quantity(
        self,
        key: str,
        kind: str,
        default: float | None = None,
        *,
        required: bool = False,
        low: float = -math.inf,
        high: float = math.inf,
        above: float = -math.inf,
    ) -> float | None:
        """A quantity in SI units within low..high, or strictly above a limit; `default` if absent or wrong."""
        value = self._value(key, quantity.expected(kind) + " (it is missing)" if required else "")
        if value is None:
            return default
        try:
            number = quantity.parse(value, kind)
        except quantity.NotAQuantity as error:
            self.wrong(key, value, str(error))
            return default
        if number <= above:
            self.wrong(key, value, f"{quantity.KINDS[kind][0]} above {_plain(above)}")
            return default
        if not low <= number <= high:
            between = (
                f"from {_plain(low)} to {_plain(high)}" if high < math.inf else f"of {_plain(low)} or more"
            )
            self.wrong(key, value, f"{quantity.KINDS[kind][0]} {between} in SI units")
            return default
        return number

    def uncertain(self, key: str, kind: str) -> Quantity | None:
        """A quantity that may carry a standard uncertainty."""
        value = self._value(key, "")
        if value is None:
            return None
        try:
            return quantity.parse_uncertain(value, kind)
        except quantity.NotAQuantity as error:
            self.wrong(key, value, f'{error}, or "unknown"')
            return None

    def text(self, key: str, default: str = "", *, required: bool = False) -> str:
        value = self._value(key, "a text (it is missing)" if required else "")
        if value is None:
            return default
        if not isinstance(value, str):
            self.wrong(key, value, "a text in quotes")
            return default
        return value

    def version(self, key: str) -> None:
        """The version of a file's format, of which there is one so far."""
        words = f"{key} = 1, the only version of such files so far"
        value = self._value(key, f"{words} (it is missing)")
        if value is not None and (isinstance(value, bool) or value != 1):
            self.wrong(key, value, words)

    def name(self, key: str) -> str:
        """A name that may become part of a file's name."""
        value = self.text(key, required=True)
        if key in self.data and isinstance(self.data[key], str) and not NAME.fullmatch(value):
            words = "a name of letters, digits, spaces and . _ + -, at most 60, that begins with a letter or digit"
            self.wrong(key, value, words)
        return value

    def integer(self, key: str, default: int, low: int, high: int, *, required: bool = False) -> int:
        words = f"a whole number from {low} to {high}"
        value = self._value(key, f"{words} (it is missing)" if required else "")
        if value is None:
            return default
        if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
            self.wrong(key, value, words)
            return default
        return value

    def number(self, key: str, default: float, low: float, high: float) -> float:
        value = self._value(key, "")
        if value is None:
            return default
        good = isinstance(value, int | float) and not isinstance(value, bool)
        if not good or not low <= value <= high:  # which nan is not, and an endless whole number can be asked
            self.wrong(key, value, f"a plain number from {_plain(low)} to {_plain(high)}")
            return default
        return float(value)

    def flag(self, key: str, default: bool) -> bool:
        value = self._value(key, "")
        if value is None:
            return default
        if not isinstance(value, bool):
            self.wrong(key, value, "true or false")
            return default
        return value

    def choice(self, key: str, choices: Sequence[str], default: str, *, required: bool = False) -> str:
        words = "one of " + ", ".join(choices)
        value = self._value(key, f"{words} (it is missing)" if required else "")
        if value is None:
            return default
        if value not in choices:
            self.wrong(key, value, words + _nearest(value, choices))
            return default
        return str(value)

    def quantities(self, key: str, kind: str, *, required: bool = False) -> list[float] | None:
        """A list of quantities; None if absent or any of it is wrong."""
        words = f'a list of {quantity.KINDS[kind][0].split(" ", 1)[1]}s such as ["{quantity.KINDS[kind][1]}"]'
        value = self._value(key, f"{words} (it is missing)" if required else "")
        if value is None:
            return None
        if not isinstance(value, list):
            self.wrong(key, value, words)
            return None
        numbers = []
        for place, item in enumerate(value):
            try:
                numbers.append(quantity.parse(item, kind))
            except quantity.NotAQuantity as error:
                self.wrong(key, item, f"{error} (entry {place + 1})")
        return numbers if len(numbers) == len(value) else None

    def finish(self) -> None:
        """Tell every key nobody asked for."""
        for key in self.data:
            if key not in self._asked:
                known = sorted(self._asked)
                self.wrong(key, self.data[key], _known(key, known))


def _known(key: str, known: Sequence[str]) -> str:
    near = difflib.get_close_matches(key, known, 1)
    return f"a known key; did you mean {near[0]}?" if near else "a known key: " + ", ".join(known)


def _nearest(value: object, choices: Sequence[str]) -> str:
    near = difflib.get_close_matches(str(value), choices, 1)
    return f"; did you mean {near[0]}?" if near else ""


def _plain(number: float) -> str:
    return f"{number:g}"
