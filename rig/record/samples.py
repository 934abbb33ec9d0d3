"""Rows of a sampler of text lines, as a journal holds them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from drivers.text_lines import TextReading


@dataclass(frozen=True)
class Samples:
    """Rows that arrived together.

    `arrival_tick` is the board tick at which they arrived, as the host estimates it: not when they were measured.
    `rows` are numbers as they stood in the lines, unscaled, one tuple a line, a number for each column but the
    ticks; `ticks` the device's own, one a row, empty if it sends none. `damaged` lines came since the last ones.
    """

    sampler: str
    arrival_tick: int
    rows: tuple[tuple[float, ...], ...] = ()
    ticks: tuple[int, ...] = ()
    damaged: int = 0

    @classmethod
    def of(cls, sampler: str, arrival_tick: int, reading: TextReading) -> Samples:
        """What one read of a text source brought."""
        return cls(
            sampler,
            arrival_tick,
            tuple(row.values for row in reading.rows),
            tuple(row.tick for row in reading.rows if row.tick is not None),
            reading.damaged,
        )

    def to_json(self) -> dict[str, Any]:
        fields: dict[str, Any] = {
            "sampler": self.sampler,
            "arrival_tick": self.arrival_tick,
            "rows": [list(row) for row in self.rows],
            "damaged": self.damaged,
        }
        if self.ticks:
            fields["ticks"] = list(self.ticks)
        return fields

    @classmethod
    def from_json(cls, fields: dict[str, Any]) -> Samples:
        """ValueError if the fields of a record are not such rows: every number finite, as many in each row."""
        sampler, rows, ticks = fields.get("sampler"), fields.get("rows"), fields.get("ticks", [])
        if not (isinstance(sampler, str) and isinstance(rows, list) and isinstance(ticks, list)):
            raise ValueError("no rows of a sampler")
        if not all(isinstance(row, list) and len(row) == len(rows[0]) for row in rows):
            raise ValueError("rows of different lengths")
        if not all(_is_number(number) for row in rows for number in row):
            raise ValueError("a row with something that is no number")
        whole = (fields.get("arrival_tick"), fields.get("damaged"), *ticks)
        if not all(type(number) is int and 0 <= number < 2**64 for number in whole):
            raise ValueError("a tick or a count that is none")
        if ticks and len(ticks) != len(rows):
            raise ValueError("ticks for other rows")
        return cls(
            sampler,
            fields["arrival_tick"],
            tuple(tuple(float(number) for number in row) for row in rows),
            tuple(ticks),
            fields["damaged"],
        )


def _is_number(number: object) -> bool:
    if isinstance(number, bool) or not isinstance(number, int | float):
        return False
    try:
        return math.isfinite(number)
    except OverflowError:  # a whole number beyond what a float holds
        return False
