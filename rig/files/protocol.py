"""Protocol files: from TOML text to a `Protocol`, checked against a rig if one is given.

haltere_protocol = 1
[protocol] name, title, notes
[[step]]  do = "staircase", ...      each key with its quantity; see the keys of every step below
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from pathlib import Path

from rig.description import RigDescription
from rig.files.extent import excess
from rig.files.fit import check_against
from rig.files.limits import SLOWEST_V_PER_S
from rig.files.lines import parse, read_text
from rig.files.staircase import read_staircase
from rig.files.table import Table
from rig.files.voltage import ABOVE_60_V, HIGHEST_V
from rig.problem import FileProblems, Problem
from rig.steps import (
    Hold,
    Mark,
    Observe,
    Prompt,
    Protocol,
    Ramp,
    Release,
    Repeat,
    Step,
    Sync,
    Tap,
    Zero,
)

LONGEST_S = 24 * 3600.0


def read_protocol(path: str | Path, rig: RigDescription | None = None) -> Protocol:
    """Read a protocol file. FileProblems with every mistake, and with every limit of `rig` it would cross."""
    return protocol_from_text(read_text(path), str(path), rig)


def protocol_from_text(text: str, name: str, rig: RigDescription | None = None) -> Protocol:
    """Read the text of a protocol file called `name` in messages."""
    document = parse(text, name)
    problems: list[Problem] = []
    if "haltere_rig" in document.data and "haltere_protocol" not in document.data:
        line = document.line(("haltere_rig",))
        raise FileProblems([Problem(name, line, "haltere_rig", "", "a protocol file; this is a rig file")])
    root = Table(document, (), document.data, problems)
    root.version("haltere_protocol")
    head = root.table("protocol")
    if head is None:
        root.wrong("protocol", None, "a table [protocol] (it is missing)")
        head = Table(document, ("protocol",), {"name": "unnamed"}, [])
    label = head.name("name")
    title, notes = head.text("title"), head.text("notes")
    head.finish()
    steps = _steps(root, "step")
    root.finish()
    too_long = excess(steps)
    if too_long:
        root.wrong("step", None, too_long)
    if rig is not None:
        check_against(rig, steps, document, problems)
    if problems:
        raise FileProblems(sorted(problems, key=lambda problem: problem.line))
    return Protocol(label, title, steps, notes, hashlib.sha256(text.encode()).hexdigest(), text)


def _steps(table: Table, key: str) -> tuple[Step, ...]:
    rows = table.data.get(key)
    table.know(key)
    if not isinstance(rows, list) or not rows or not all(isinstance(row, dict) for row in rows):
        table.wrong(key, None if rows is None else rows, f"one or more [[{key}]] tables")
        return ()
    steps = []
    for number, row in enumerate(rows):
        one = Table(table.document, (*table.path, key, number), row, table.problems)
        do = one.choice("do", tuple(READERS), "", required=True)
        if do:
            step = READERS[do](one, one.line(), one.text("label"))
            one.finish()
            if step is not None:
                steps.append(step)
    return tuple(steps)


def _time(table: Table, key: str, default: float | None = None, *, required: bool = False) -> float | None:
    return table.quantity(key, "time", default, required=required, low=0.0, high=LONGEST_S)


def _by(table: Table) -> str:
    return table.choice("by", ("tapper", "hand"), "tapper")


def _ramp(table: Table, line: int, label: str) -> Step | None:
    to_v = table.quantity("to", "voltage", required=True, low=0.0)
    if to_v is not None and to_v > HIGHEST_V:
        table.wrong("to", table.data["to"], ABOVE_60_V)
    slew = table.quantity("slew", "slew", low=SLOWEST_V_PER_S)
    return None if to_v is None else Ramp(to_v=to_v, slew_v_per_s=slew, line=line, label=label)


def _hold(table: Table, line: int, label: str) -> Step | None:
    for_s = _time(table, "for")
    until = table.choice("until", ("settled", "precise"), "") or None
    precision = table.quantity("precision", "rate", above=0.0)
    impulse = table.quantity("impulse", "impulse")
    observe = table.quantity("tap_observe", "time", 4.0, low=0.5, high=120.0) or 4.0
    at_most = table.quantity("at_most", "time", 60.0, above=0.0, high=LONGEST_S) or 60.0
    by = _by(table)
    if (for_s is None) == (until is None):
        if "for" not in table or "until" in table:
            table.wrong("", None, 'either for = "..." or until = "settled" or "precise", not both or neither')
        return None
    if until == "precise" and (precision is None or impulse is None):
        table.wrong(
            "until", until, "precision and impulse beside it: taps are given until the decay is known"
        )
        return None
    if until != "precise":
        for key in ("precision", "impulse"):
            if key in table:
                table.wrong(key, table.data[key], 'this key only with until = "precise"')
    return Hold(
        for_s=for_s,
        until=until,
        precision_per_s=precision,
        impulse_n_m_s=impulse,
        tap_observe_s=observe,
        by=by,
        at_most_s=at_most,
        line=line,
        label=label,
    )


def _tap(table: Table, line: int, label: str) -> Step | None:
    impulse = table.quantity("impulse", "impulse", required=True)
    observe = table.quantity("observe", "time", 4.0, low=0.5, high=120.0) or 4.0
    by = _by(table)
    if impulse == 0.0:
        table.wrong("impulse", table.data["impulse"], "an impulse that is not zero")
        return None
    return (
        None
        if impulse is None
        else Tap(impulse_n_m_s=impulse, observe_s=observe, by=by, line=line, label=label)
    )


def _release(table: Table, line: int, label: str) -> Step | None:
    angle = table.quantity("angle", "angle", required=True)
    observe = table.quantity("observe", "time", 4.0, low=0.5, high=600.0) or 4.0
    return None if angle is None else Release(angle_rad=angle, observe_s=observe, line=line, label=label)


def _observe(table: Table, line: int, label: str) -> Step | None:
    for_s = table.quantity("for", "time", required=True, above=0.0, high=LONGEST_S)
    return None if for_s is None else Observe(for_s=for_s, line=line, label=label)


def _mark(table: Table, line: int, label: str) -> Step | None:
    return Mark(text=table.text("text", required=True), line=line, label=label)


def _sync(table: Table, line: int, label: str) -> Step | None:
    return Sync(line=line, label=label)


def _zero(table: Table, line: int, label: str) -> Step | None:
    for_s = table.quantity("for", "time", 1.0, low=0.1, high=600.0) or 1.0
    return Zero(for_s=for_s, line=line, label=label)


def _prompt(table: Table, line: int, label: str) -> Step | None:
    text = table.text("text", required=True)
    at_most = table.quantity("at_most", "time", 60.0, above=0.0, high=LONGEST_S) or 60.0
    return Prompt(text=text, at_most_s=at_most, line=line, label=label)


def _repeat(table: Table, line: int, label: str) -> Step | None:
    times = table.integer("times", 1, 1, 1000, required=True)
    steps = _steps(table, "step")
    return Repeat(times=times, steps=steps, line=line, label=label)


READERS: dict[str, Callable[[Table, int, str], Step | None]] = {
    "ramp": _ramp,
    "hold": _hold,
    "tap": _tap,
    "release": _release,
    "observe": _observe,
    "mark": _mark,
    "sync": _sync,
    "staircase": read_staircase,
    "repeat": _repeat,
    "zero": _zero,
    "prompt": _prompt,
}
