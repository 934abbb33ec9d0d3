"""Rows and events of a session once more through the analyst, in the order in which a run gives them.

An event is given after the rows up to its tick, rows beyond it only after the event, whatever the blocks are:
so verdicts come in one order, and with the numbers they had while the run was on.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np

from drivers.channels import ChannelTable
from drivers.rows import RowBlock
from rig.description import RigDescription
from rig.evaluation.analyst import Analyst
from rig.events import Event
from rig.results import SessionResult
from rig.verdicts import Verdict

#: Rows fed at a time when nobody watches.
ROWS_PER_BLOCK = 10_000


class Rows(Protocol):
    """Stored rows: `rig.session.Stream`. `losses` are (tick of the row after, rows, frames, overruns)."""

    channels: ChannelTable
    tick_hz: int
    losses: tuple[tuple[int, ...], ...]

    def blocks(self, rows_per_block: int) -> Iterator[RowBlock]: ...


class Analysis(Protocol):
    """What is fed: `rig.evaluation.analyst.Analyst`."""

    def feed(self, blocks: Sequence[RowBlock], events: Sequence[Event]) -> list[Verdict]: ...


@dataclass(frozen=True)
class Step:
    """What was given at once and what it made known; `tick` is that of the last row so far, -1 before any."""

    tick: int
    events: tuple[Event, ...]
    verdicts: tuple[Verdict, ...]


class Replay:
    """One session gone through once: take all `steps`, then `finish`. `verdicts` are those told so far."""

    def __init__(self, rig: RigDescription, rows: Rows, events: Sequence[Event]) -> None:
        self._rows = rows
        self._events = events
        self._analyst = Analyst(rig, rows.channels, rows.tick_hz)
        self.verdicts: list[Verdict] = []

    def steps(self, rows_per_block: int = ROWS_PER_BLOCK) -> Iterator[Step]:
        """Rows in blocks of any size; the size makes no difference to what is told."""
        for step in replay(self._analyst, self._rows.blocks(rows_per_block), self._events):
            self.verdicts.extend(step.verdicts)
            yield step

    def finish(self) -> SessionResult:
        """Results of the whole session."""
        # From the file: what was lost before a row that is lost itself is told by no block.
        self._analyst.store.lost_rows = sum(loss[1] for loss in self._rows.losses)
        self._analyst.store.lost_frames = sum(loss[2] for loss in self._rows.losses)
        return self._analyst.finish()


def replay(analysis: Analysis, blocks: Iterable[RowBlock], events: Iterable[Event]) -> Iterator[Step]:
    """Feed everything, events in the order given; a step for each stretch of rows and each event."""
    waiting = deque(events)
    tick = -1
    for block in blocks:
        rest: RowBlock | None = block
        while rest is not None:
            part, rest = _cut(rest, waiting[0].tick) if waiting else (rest, None)
            if part is not None:
                tick = int(part.tick[-1])
                yield Step(tick, (), tuple(analysis.feed([part], [])))
            # With rows left the event's tick has been passed; without, only if the last row reached it.
            if waiting and (rest is not None or waiting[0].tick <= tick):
                event = waiting.popleft()
                yield Step(tick, (event,), tuple(analysis.feed([], [event])))
    for event in waiting:
        yield Step(tick, (event,), tuple(analysis.feed([], [event])))


def _cut(block: RowBlock, tick: int) -> tuple[RowBlock | None, RowBlock | None]:
    """The rows up to a tick, and those after it; None for no rows. What was lost is told with the first."""
    rows = int(np.searchsorted(block.tick, np.uint64(max(tick, 0)), side="right"))
    if rows == len(block):
        return block, None
    if rows == 0:
        return None, block
    return (
        replace(block, tick=block.tick[:rows], raw=block.raw[:rows]),
        replace(block, tick=block.tick[rows:], raw=block.raw[rows:], lost_rows=0, lost_frames=0),
    )
