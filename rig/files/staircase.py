"""Reading a staircase: its levels, their order, the returns to a reference, the taps."""

from __future__ import annotations

import math
import random

from rig.files.limits import SLOWEST_V_PER_S
from rig.files.table import Table
from rig.files.voltage import ABOVE_60_V, HIGHEST_V
from rig.steps import Staircase

ORDERS = ("rising", "falling", "shuffled", "loop")
MOST_LEVELS = 500


def read_staircase(table: Table, line: int, label: str) -> Staircase | None:
    """Levels as a list, or as from, to and step; visited rising, falling, shuffled (seed) or as a closed loop."""
    levels = _levels(table)
    order = table.choice("order", ORDERS, "", required=True)
    if levels is not None:
        _as_written(table, levels, order)
    seed = table.integer("seed", 1, 0, 2**31 - 1)
    if "seed" in table and order != "shuffled":
        table.wrong("seed", table.data["seed"], 'a seed only with order = "shuffled"')
    return_to = table.quantity("return_to", "voltage", above=0.0)
    if return_to is not None and return_to > HIGHEST_V:
        table.wrong("return_to", table.data["return_to"], ABOVE_60_V)
    every = table.integer("return_every", 1, 1, MOST_LEVELS)
    if "return_every" in table and return_to is None:
        table.wrong("return_every", table.data["return_every"], "return_to beside it")
    slew = table.quantity("slew", "slew", low=SLOWEST_V_PER_S)
    settle = table.quantity("settle", "time", 3.0, low=0.0, high=600.0)
    at_most = table.quantity("settle_at_most", "time", 10.0, low=0.0, high=3600.0)
    quiet = table.quantity("quiet", "time", 2.0, low=0.0, high=600.0)
    taps = table.quantities("taps", "impulse") if "taps" in table else []
    observe = table.quantity("tap_observe", "time", 4.0, low=0.5, high=120.0)
    by = table.choice("by", ("tapper", "hand"), "tapper")
    precision = table.quantity("precision", "rate", above=0.0)
    lost = table.integer("stop_after_lost", 0, 0, MOST_LEVELS)
    if settle is not None and at_most is not None and "settle_at_most" in table and at_most < settle:
        table.wrong("settle_at_most", table.data["settle_at_most"], "a time no shorter than settle")
    if taps is not None and any(tap == 0.0 for tap in taps):
        table.wrong("taps", table.data["taps"], "impulses that are not zero")
        return None
    if precision is not None and not taps:
        table.wrong("precision", table.data["precision"], "taps beside it: the decay is known from taps only")
    if levels is None or taps is None or not order:
        return None
    visited, directions = _order(levels, order, seed)
    visited, directions, roles = _with_returns(visited, directions, return_to, every)
    return Staircase(
        levels_v=tuple(visited),
        directions=tuple(directions),
        roles=tuple(roles),
        order=order,
        slew_v_per_s=slew,
        settle_s=3.0 if settle is None else settle,
        settle_at_most_s=max(10.0 if at_most is None else at_most, settle or 0.0),
        quiet_s=2.0 if quiet is None else quiet,
        taps_n_m_s=tuple(taps),
        tap_observe_s=4.0 if observe is None else observe,
        by=by,
        precision_per_s=precision,
        stop_after_lost=lost,
        line=line,
        label=label,
    )


def _levels(table: Table) -> list[float] | None:
    if "levels" in table:
        for key in ("from", "to", "step"):
            if key in table:
                table.wrong(key, table.data[key], "either levels, or from, to and step, not both")
        levels = table.quantities("levels", "voltage", required=True)
        for key in ("from", "to", "step"):
            table.quantity(key, "voltage")
    else:
        first = table.quantity("from", "voltage", required=True)
        last = table.quantity("to", "voltage", required=True)
        step = table.quantity("step", "voltage", required=True, above=0.0)
        if first is None or last is None or step is None:
            return None
        count = math.floor(abs(last - first) / step + 1e-9) + 1
        if count > MOST_LEVELS:
            table.wrong("step", table.data["step"], f"a step that makes at most {MOST_LEVELS} levels")
            return None
        levels = [round(first + math.copysign(step, last - first) * k, 9) for k in range(count)]
    if levels is None:
        return None
    key = "levels" if "levels" in table else "from"
    if not 1 <= len(levels) <= MOST_LEVELS:
        table.wrong(key, table.data[key], f"1 to {MOST_LEVELS} levels")
        return None
    if any(level <= 0.0 for level in levels):
        table.wrong(key, table.data[key], "levels above 0 V")
        return None
    if max(levels) > HIGHEST_V:
        table.wrong(key, table.data[key], ABOVE_60_V)
    if len(set(levels)) < len(levels):
        table.wrong(key, table.data[key], "each level once (use repeat, or a loop, to come back)")
        return None
    return levels


def _as_written(table: Table, levels: list[float], order: str) -> None:
    """Levels are visited as they are written; what contradicts the order is a slip, not ours to sort."""
    key = "levels" if "levels" in table else "from"
    if order in ("rising", "loop") and levels != sorted(levels):
        table.wrong(key, table.data[key], f'levels that rise, lowest first, with order = "{order}"')
    if order == "falling" and levels != sorted(levels, reverse=True):
        table.wrong(key, table.data[key], 'levels that fall, highest first, with order = "falling"')


def _order(levels: list[float], order: str, seed: int) -> tuple[list[float], list[str]]:
    """Levels in the order they are visited, and the direction each is reached from."""
    rising = sorted(levels)
    if order == "rising":
        return rising, ["rising"] * len(rising)
    if order == "falling":
        return rising[::-1], ["falling"] * len(rising)
    if order == "loop":
        down = rising[-2::-1]
        return rising + down, ["rising"] * len(rising) + ["falling"] * len(down)
    shuffled = rising[:]
    random.Random(seed).shuffle(shuffled)
    return shuffled, _reached(shuffled)


def _reached(levels: list[float]) -> list[str]:
    before = [0.0, *levels[:-1]]
    return ["rising" if level >= last else "falling" for last, level in zip(before, levels, strict=True)]


def _with_returns(
    levels: list[float], directions: list[str], return_to: float | None, every: int
) -> tuple[list[float], list[str], list[str]]:
    if return_to is None:
        return levels, directions, ["level"] * len(levels)
    visited: list[float] = [return_to]
    roles = ["reference"]
    for number, level in enumerate(levels, start=1):
        visited.append(level)
        roles.append("level")
        if number % every == 0 or number == len(levels):
            visited.append(return_to)
            roles.append("reference")
    return visited, _reached(visited), roles
