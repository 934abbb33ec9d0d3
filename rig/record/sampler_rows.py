"""Rows of text samplers on their way from a journal into a session file.

/samplers/NAME              attributes: limits (what the rows are not good for), damaged_lines, tick_hz (0: none)
/samplers/NAME/arrival_tick uint64, board tick at which a row arrived at the host, as estimated there
/samplers/NAME/time_s       float64, board time of the arrival since the first row of the board
/samplers/NAME/device_tick  uint64, the device's own, where it sends one
/samplers/NAME/COLUMN       float64 as it stood in the line; attributes measures, unit, scale, offset:
                            value = number * scale + offset
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

from rig.record.digests import DigestingFile
from rig.record.samples import Samples

TAKEN = ("arrival_tick", "time_s", "device_tick")


@dataclass
class SamplerRows:
    """All rows of one sampler, in order of arrival."""

    arrival_tick: list[int] = field(default_factory=list)
    rows: list[tuple[float, ...]] = field(default_factory=list)
    device_tick: list[int] = field(default_factory=list)
    damaged: int = 0

    def add(self, samples: Samples) -> None:
        """ValueError if they differ from those before in the number of columns, or in having ticks."""
        if self.rows and samples.rows and len(samples.rows[0]) != len(self.rows[0]):
            raise ValueError("rows of another number of columns")
        if self.rows and samples.rows and bool(samples.ticks) != bool(self.device_tick):
            raise ValueError("rows with ticks among rows without")
        self.arrival_tick += [samples.arrival_tick] * len(samples.rows)
        self.rows += samples.rows
        self.device_tick += samples.ticks
        self.damaged += samples.damaged


def fill(
    book: DigestingFile, place: str, rows: SamplerRows, told: dict[str, Any], origin: int, tick_hz: int
) -> None:
    """Write one sampler's rows. `told` is its part of the header, `origin` the board's first tick."""
    count = len(rows.rows)
    arrival = np.array(rows.arrival_tick, dtype=np.uint64)
    since = (arrival.astype(np.int64) - origin).astype(np.float64) / tick_hz
    book.column(f"{place}/arrival_tick", (count,), "u8", [arrival])
    book.column(f"{place}/time_s", (count,), "f8", [since])
    if rows.device_tick:
        book.column(f"{place}/device_tick", (count,), "u8", [np.array(rows.device_tick, dtype=np.uint64)])
    width = len(rows.rows[0]) if rows.rows else 0
    values = np.array(rows.rows, dtype=np.float64).reshape(count, width)
    for index, (name, column) in enumerate(_described(told, width)):
        book.column(f"{place}/{name}", (count,), "f8", [values[:, index]])
        book.attribute_set(
            f"{place}/{name}",
            {
                "measures": str(column.get("measures", "other")),
                "unit": str(column.get("unit", "1")),
                "scale": _number(column, "scale", 1.0),
                "offset": _number(column, "offset", 0.0),
            },
        )
    limits = told.get("limits", [])
    book.attribute_set(
        place,
        {
            "limits": "; ".join(map(str, limits)) if isinstance(limits, list | tuple) else "",
            "damaged_lines": rows.damaged,
            "tick_hz": _number(told, "tick_hz", 0.0),
        },
    )


def _described(told: dict[str, Any], width: int) -> list[tuple[str, dict[str, Any]]]:
    """Name and description of each column; of a header that does not fit the rows nothing is taken."""
    columns = told.get("columns")
    if isinstance(columns, list) and len(columns) == width and all(isinstance(one, dict) for one in columns):
        names = [str(one.get("name", "")) for one in columns]
        if len(set(names)) == width and all(name.isidentifier() and name not in TAKEN for name in names):
            return list(zip(names, columns, strict=True))
    return [(f"column{index}", {}) for index in range(width)]


def _number(fields: dict[str, Any], name: str, default: float) -> float:
    value = fields.get(name, default)
    return float(value) if isinstance(value, int | float) and abs(value) <= 1e300 else default
