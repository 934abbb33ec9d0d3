"""Reading `[sampler.NAME]` tables: devices beside the board that print text lines.

    [sampler.strain]
    port = "/dev/ttyUSB1"
    baud = 115200                  # unless told otherwise
    delimiter = "comma"            # or semicolon, tab, space
    tick_rate = "1 MHz"            # with a column of ticks, and only then

    [sampler.strain.column.clock]  # the fields of a line, in this order
    measures = "tick"              # the device's own clock; at most one

    [sampler.strain.column.force]
    measures = "vertical load"
    per_count = "1 mN"             # of what the device prints
    zero = "0.2 N"                 # and polarity, as for channels

    [sampler.strain.column.valve]
    measures = "other"             # a plain number without a unit

What such lines are not good for is told by `drivers.text_lines`, and by `haltere check`.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from drivers.channels import MEASURED_UNITS
from drivers.text_lines import DELIMITERS, TextColumn, TextSampler
from rig.files.channels import KINDS, NAMES_TAKEN
from rig.files.table import Table

TICK, OTHER = "tick", "other"
MEASURES = (*KINDS, OTHER, TICK)
#: Streams of a session that are there already.
SAMPLERS_TAKEN = ("board",)
MOST_COLUMNS = 64


def read_samplers(table: Table | None, board_port: str = "") -> tuple[TextSampler, ...]:
    """All samplers in the order of the file; `board_port` is taken already ("": none)."""
    samplers: list[TextSampler] = []
    ports = {board_port: "the board"} if board_port else {}
    for name in table.data if table is not None else ():
        assert table is not None
        one = table.table(name)
        if one is None:
            continue
        if name in SAMPLERS_TAKEN or not name.isidentifier():
            one.wrong("", name, "a sampler name of letters, digits and _, beginning with a letter, not board")
        sampler = _sampler(name, one)
        if sampler.port in ports:
            one.wrong("port", sampler.port, f"a port of its own; {ports[sampler.port]} is there")
        elif sampler.port:
            ports[sampler.port] = f"sampler {name}"
        samplers.append(sampler)
    return tuple(samplers)


def sampler_lines(samplers: Sequence[TextSampler]) -> list[str]:
    """What a rig's samplers are, and what their rows are not good for, two lines each."""
    lines = []
    for one in samplers:
        columns = ", ".join(f"{column.name} ({column.measures}, {column.unit})" for column in one.columns)
        lines.append(
            f"sampler {one.name}: text lines from {one.port}, {one.baud} baud, {one.delimiter}: {columns}"
        )
        lines.append(f"  {'; '.join(one.limits)}")
    return lines


def _sampler(name: str, table: Table) -> TextSampler:
    port = table.text("port", required=True)
    if "port" in table and isinstance(table.data["port"], str) and not port.strip():
        table.wrong("port", port, 'the port of the device, for example "/dev/ttyUSB1"')
    baud = table.integer("baud", 115_200, 300, 12_000_000)
    delimiter = table.choice("delimiter", tuple(DELIMITERS), "comma", required=True)
    columns, tick_column = _columns(table)
    tick_hz = table.quantity("tick_rate", "frequency", 0.0, low=1.0, high=1e9) or 0.0
    if tick_column is None and "tick_rate" in table:
        table.wrong("tick_rate", table.data["tick_rate"], 'a column with measures = "tick" beside it')
    elif tick_column is not None and "tick_rate" not in table:
        table.wrong("tick_rate", None, 'the rate of the device\'s ticks such as "1 MHz" (it is missing)')
    table.finish()
    return TextSampler(name, port, columns, baud, delimiter, tick_column, tick_hz)


def _columns(table: Table) -> tuple[tuple[TextColumn, ...], int | None]:
    """The columns with values, and the place of the ticks among all."""
    words = f"one to {MOST_COLUMNS} tables [{'.'.join(str(part) for part in table.path)}.column.NAME]"
    part = table.table("column")
    if part is None:
        table.wrong("column", None, f"{words} (they are missing)")
        return (), None
    columns: list[TextColumn] = []
    tick_column: int | None = None
    for place, name in enumerate(part.data):
        one = part.table(name)
        if one is None:
            continue
        measures = one.choice("measures", MEASURES, "", required=True)
        if measures == TICK:
            if tick_column is not None:
                one.wrong("measures", TICK, "one column of ticks; there is one already")
            tick_column = place
            one.finish()
            continue
        if name in NAMES_TAKEN or not name.isidentifier():
            words = (
                "a column name of letters, digits and _, beginning with a letter, not tick, time_s or status"
            )
            one.wrong("", name, words)
        if measures:
            columns.append(_column(name, measures, one))
    if not 1 <= len(part.data) <= MOST_COLUMNS:
        table.wrong("column", None, words)
    elif tick_column is not None and len(part.data) == 1:
        table.wrong("column", None, "a column beside the ticks")
    return tuple(columns), tick_column


def _column(name: str, measures: str, table: Table) -> TextColumn:
    zero = 0.0
    if measures == OTHER:
        scale = table.number("per_count", 1.0, 1e-12, 1e12)
        zero = table.number("zero", 0.0, -1e12, 1e12)
    else:
        kind = KINDS[measures]
        if "counts_per_turn" in table and kind == "angle":
            scale = 2.0 * math.pi / table.integer("counts_per_turn", 1, 1, 10_000_000)
        else:
            scale = table.quantity("per_count", kind, required=True, above=0.0) or 1.0
        zero = table.quantity("zero", kind, 0.0) or 0.0
    polarity = table.integer("polarity", 1, -1, 1)
    if polarity == 0:
        table.wrong("polarity", 0, "1 or -1")
        polarity = 1
    table.finish()
    return TextColumn(name, measures, MEASURED_UNITS[measures], polarity * scale, 0.0 - zero)
