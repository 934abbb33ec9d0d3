"""Rows from any microcontroller that prints numbers: delimited text lines as a second sampler beside the board.

    1.25,-0.5,301\\n      fields in a fixed order, any of CR, LF and CRLF at the end

What such a line cannot do, whoever uses it must know:
* It has no check sum. A line that lost a byte is usually damaged and counted; a flipped digit goes unseen.
* Its time is that of its arrival at the host, some milliseconds late and uneven (USB, buffers, the scheduler),
  unless the device sends a column of its own ticks; then rows are evenly timed, by a clock that drifts.
* Up to about 1000 lines a second; beyond that the device or the line buffers, and time means even less.
* A line that never came leaves no trace, unless ticks tell.
So it is never used by an interlock, and no decay rate is taken from it. It is for what moves slowly or only has to
be on record: a temperature, a supply, a second load cell.
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray

#: Names people give a delimiter, and what stands on the line. A run of spaces is one delimiter.
DELIMITERS = {"comma": b",", "semicolon": b";", "tab": b"\t", "space": b" "}
LONGEST_LINE = 512
#: One number: no thousands, no decimal comma, no nan, no inf, no hexadecimal, no underscores.
NUMBER = re.compile(rb"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]{1,2})?")
SPACES = re.compile(rb" +")
TICK = re.compile(rb"[0-9]{1,20}")
LIMITS = (
    "no check sum: a flipped digit goes unseen",
    "at most about 1000 lines a second",
    "never used by interlocks or for decay",
)
ARRIVAL = "timed by arrival at the host, with some ms of jitter"


@dataclass(frozen=True)
class TextColumn:
    """One field of a line. Value in `unit` = number * scale + offset."""

    name: str
    measures: str
    unit: str
    scale: float = 1.0
    offset: float = 0.0

    def values(self, numbers: NDArray[np.float64]) -> NDArray[np.float64]:
        """Scale numbers as they stood in the lines, of any shape."""
        return np.asarray(numbers, dtype=np.float64) * self.scale + self.offset


@dataclass(frozen=True)
class TextSampler:
    """One source of text lines, as a rig file describes it.

    `tick_column` is the place of the device's own tick among the fields of a line (0 is the first), None if it
    sends none; `columns` are the other fields in their order. `tick_hz` is 0 without ticks.
    """

    name: str
    port: str
    columns: tuple[TextColumn, ...]
    baud: int = 115_200
    delimiter: str = "comma"
    tick_column: int | None = None
    tick_hz: float = 0.0

    @property
    def limits(self) -> tuple[str, ...]:
        """What its rows are not good for, each a short phrase."""
        timing = (
            f"timed by its own ticks of {self.tick_hz:.12g} Hz" if self.tick_column is not None else ARRIVAL
        )
        return (LIMITS[0], timing, *LIMITS[1:])


class TextRow(NamedTuple):
    """One intact line: its numbers as they stood there, unscaled, and the device's tick (None without)."""

    values: tuple[float, ...]
    tick: int | None = None


class TextLines:
    """Rows out of bytes as they come; knows nothing of ports.

    `columns` counts the values of a line, beside the tick if there is a `tick_column`. How the bytes are cut makes
    no difference, and no bytes raise anything: whatever is not plainly a line of numbers is counted in `damaged`.
    Whoever begins to listen does so in mid-line, so what comes before the first line end is neither used nor
    counted. Empty lines are nothing.
    """

    def __init__(self, columns: int, delimiter: str = "comma", tick_column: int | None = None) -> None:
        if columns < 1 or (tick_column is not None and not 0 <= tick_column <= columns):
            raise ValueError(f"no lines of {columns} columns with ticks in column {tick_column}")
        if delimiter not in DELIMITERS:
            raise ValueError(f"no delimiter is called {delimiter!r}")
        self.damaged = 0
        self._delimiter = DELIMITERS[delimiter]
        self._fields = columns + (tick_column is not None)
        self._tick_column = tick_column
        self._rest = b""  # of a line that has no end yet
        self._first = True  # the line that is coming may have been cut at its beginning
        self._long = False  # the line that is coming is too long already, and counted

    def feed(self, data: bytes) -> list[TextRow]:
        """The rows whose line ends are in `data`, in their order."""
        *lines, rest = (self._rest + data).replace(b"\r", b"\n").split(b"\n")
        rows = []
        for line in lines:
            if self._long:
                self._long = False
            elif len(line) > LONGEST_LINE:
                self.damaged += 1
            elif not self._first and line.strip(b" \t"):
                row = self._row(line)
                if row is not None:
                    rows.append(row)
                else:
                    self.damaged += 1
            self._first = False
        if len(rest) > LONGEST_LINE and not self._long:
            self._long = True
            self.damaged += 1
        self._rest = b"" if self._long else rest
        return rows

    def _row(self, line: bytes) -> TextRow | None:
        if self._delimiter == b" ":
            fields = SPACES.split(line.strip(b" "))
        else:
            fields = line.split(self._delimiter)
        if len(fields) != self._fields:
            return None
        tick = None
        values = []
        for place, field in enumerate(fields):
            text = field.strip(b" \t")
            if place == self._tick_column:
                tick = int(text) if TICK.fullmatch(text) else 2**64
                if tick >= 2**64:
                    return None
            else:
                value = float(text) if NUMBER.fullmatch(text) else math.inf
                if not math.isfinite(value):  # a number of 400 digits is beyond what a float holds
                    return None
                values.append(value)
        return TextRow(tuple(values), tick)


class Incoming(Protocol):
    """What a sampler needs of a port; `drivers.ports.open_wire` gives one."""

    def read(self, max_wait_s: float) -> bytes:
        """All bytes there are, after waiting up to `max_wait_s` for the first. Raises LinkError when it is gone."""

    def close(self) -> None: ...


class TextReading(NamedTuple):
    """What one read brought: rows that arrived together, and how many damaged lines came among them."""

    rows: Sequence[TextRow] = ()
    damaged: int = 0


class TextSource:
    """A text sampler on its open port. One owner reads and closes."""

    def __init__(self, sampler: TextSampler, wire: Incoming) -> None:
        self.sampler = sampler
        self._wire = wire
        self._lines = TextLines(len(sampler.columns), sampler.delimiter, sampler.tick_column)

    @property
    def damaged(self) -> int:
        """Damaged lines so far."""
        return self._lines.damaged

    def read(self, max_wait_s: float = 0.0) -> TextReading:
        """What has come, after waiting up to `max_wait_s` for the first byte. Raises LinkError."""
        before = self._lines.damaged
        rows = self._lines.feed(self._wire.read(max_wait_s))
        return TextReading(rows, self._lines.damaged - before)

    def close(self) -> None:
        self._wire.close()
