"""A run on the simulated boom with what a test needs to look at afterwards."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from drivers.clock import VirtualClock
from drivers.rows import RowBlock, RowFrame
from drivers.simulated.bench import SimulatedBench
from rig.bench_source import bench_for
from rig.description import Limits, RigDescription
from rig.events import Event
from rig.files.rig import read_rig
from rig.run.loop import Loop, RunOutcome
from rig.run.runner import OperatorInput
from rig.shipped import find
from rig.steps import Protocol, Step
from rig.verdicts import Verdict


@dataclass
class Book:
    """A journal in memory."""

    frames: list[RowFrame] = field(default_factory=list)
    events: list[Event] = field(default_factory=list)
    lost: list[tuple[int, int, int]] = field(default_factory=list)
    free_bytes: int = 10**12
    fail_after: int | None = None

    def frame(self, frame: RowFrame) -> None:
        if self.fail_after is not None and len(self.frames) >= self.fail_after:
            from rig.record.errors import JournalFailure

            raise JournalFailure("the disk is full")
        self.frames.append(frame)

    def losses(self, rows: int, frames: int, overruns: int) -> None:
        self.lost.append((rows, frames, overruns))

    def event(self, event: Event) -> None:
        self.events.append(event)

    def flush(self) -> None:
        pass

    def kinds(self) -> list[str]:
        return [event.kind for event in self.events]

    def of(self, kind: str) -> list[Event]:
        return [event for event in self.events if event.kind == kind]


class Analyst:
    """Answers from a script: (seconds since the first row, verdict) pairs, nothing else."""

    def __init__(self, answer: Callable[[int, Sequence[Event]], list[Verdict]] | None = None) -> None:
        self._answer = answer
        self.rows = 0

    def feed(self, blocks: Sequence[RowBlock], events: Sequence[Event]) -> list[Verdict]:
        self.rows += sum(len(block) for block in blocks)
        tick = int(blocks[-1].tick[-1]) if blocks else (events[-1].tick if events else 0)
        return [] if self._answer is None else self._answer(tick, events)


class Person:
    """An operator who acts at given times, s of clock time."""

    def __init__(self, clock: VirtualClock, acts: dict[float, OperatorInput]) -> None:
        self._clock = clock
        self._acts = dict(acts)
        self.heard: list[str] = []

    def inputs(self) -> list[OperatorInput]:
        due = [time for time in self._acts if time <= self._clock.now_s()]
        return [self._acts.pop(time) for time in sorted(due)]

    def prompt(self, text: str) -> None:
        self.heard.append(text)


@dataclass
class Run:
    outcome: RunOutcome
    book: Book
    bench: SimulatedBench
    loop: Loop
    person: Person


def boom(**limits: Any) -> RigDescription:
    rig = read_rig(find("boom"))
    changed: Limits = replace(rig.limits, **limits)
    return replace(rig, limits=changed)


def go(
    steps: Sequence[Step],
    rig: RigDescription | None = None,
    *,
    answer: Callable[[int, Sequence[Event]], list[Verdict]] | None = None,
    acts: dict[float, OperatorInput] | None = None,
    prepare: Callable[[SimulatedBench], None] | None = None,
    book: Book | None = None,
    may_go_on: bool = False,
) -> Run:
    """Run steps on the simulated boom with scripted verdicts and operator."""
    rig = rig or boom()
    clock = VirtualClock()
    bench = bench_for(rig, clock)
    assert isinstance(bench, SimulatedBench)
    hello = bench.open()
    if prepare is not None:
        prepare(bench)
    person = Person(clock, acts or {})
    book = book or Book()
    protocol = Protocol(name="test", title="", steps=tuple(steps))
    analyst = Analyst(answer)
    loop = Loop(bench, hello, rig, protocol, book, analyst, clock, None, person, may_go_on=may_go_on)
    return Run(loop.run(), book, bench, loop, person)
