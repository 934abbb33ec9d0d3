"""The analysis of a run, fed with rows and events as they come; the same one for live, stored and replayed.

What it answers depends on rows and events only, never on how the rows were cut into blocks: everything is
worked out at the tick of an event or of the half-second grid, from rows before that tick.
"""

from __future__ import annotations

import math
from collections import deque
from collections.abc import Sequence

from analysis.decay.level import LevelDecay
from analysis.flap import mean_flap
from drivers.channels import ChannelTable
from drivers.rows import RowBlock
from rig.description import RigDescription
from rig.evaluation.conclusions import conclude
from rig.evaluation.evidence import Evidence, Key
from rig.evaluation.level import (
    VisitAnalysis,
    fit_visits,
    level_result,
    look_at_end,
    look_at_quiet,
    visit_state,
)
from rig.evaluation.stream import RowStore
from rig.evaluation.tap import analyse_tap
from rig.evaluation.timeline import Timeline
from rig.evaluation.window import FEWEST_ROWS, state_of, window
from rig.events import Event
from rig.results import LevelResult, SessionResult
from rig.verdicts import Condition, LevelVerdict, TapVerdict, Verdict

GRID_S = 0.5  # how often the condition of crank and body is told
CONDITION_S = 1.5  # over how long a window
NORMAL_95 = 1.959964


class Analyst:
    """Turns one session's rows and events into verdicts while it runs and results at its end."""

    def __init__(self, rig: RigDescription, channels: ChannelTable, tick_hz: int) -> None:
        self.rig = rig
        self.store = RowStore(channels, tick_hz)
        self.timeline = Timeline()
        self.visits: list[VisitAnalysis] = []
        self._pending: deque[Event] = deque()
        self._grid_ticks = int(GRID_S * tick_hz)
        self._next_grid: int | None = None
        self._fits: dict[Key, LevelDecay | None] = {}
        self._closed: set[int] = set()

    def feed(self, blocks: Sequence[RowBlock], events: Sequence[Event]) -> list[Verdict]:
        """Take rows and events, each in order; answers what they make known."""
        for block in blocks:
            self.store.append(block)
        self._pending.extend(events)
        return self._advance(self.store.last_tick)

    def finish(self) -> SessionResult:
        """Results of everything fed so far."""
        self._advance(None)
        self._close_visits()
        return conclude(self.evidence())

    def evidence(self) -> Evidence:
        """What is known so far, level by level."""
        return Evidence(
            rig=self.rig,
            store=self.store,
            timeline=self.timeline,
            levels=tuple(self.levels()),
            pools=self._pools(),
            fits=self._fits,
        )

    def levels(self) -> list[LevelResult]:
        """The level table so far: visits to one drive in one direction are one level."""
        return [
            level_result(visits, self._fits.get(key), self.store, self.rig, self._zero_load())
            for key, visits in self._pools().items()
        ]

    # -- in time ---------------------------------------------------------------------------------------

    def _advance(self, until: int | None) -> list[Verdict]:
        """Handle grid points and events up to a tick (None: all), in order of tick."""
        told: list[Verdict] = []
        if self._next_grid is None and len(self.store):
            self._next_grid = self.store.first_tick + self._grid_ticks
        while True:
            event_tick = self._pending[0].tick if self._pending else None
            grid_due = (
                self._next_grid is not None
                and self._next_grid <= self.store.last_tick
                and (event_tick is None or self._next_grid < event_tick)
            )
            if grid_due and self._next_grid is not None:
                condition = self._condition(self._next_grid)
                if condition is not None:
                    told.append(condition)
                self._next_grid += self._grid_ticks
            elif event_tick is not None and (until is None or event_tick <= until):
                told.extend(self._take(self._pending.popleft()))
            else:
                return told

    def _condition(self, tick: int) -> Condition | None:
        part = window(self.store, tick - int(CONDITION_S * self.store.tick_hz), tick)
        state = state_of(part, self.rig) if part.span_s > 0.8 * CONDITION_S else None
        if state is None:
            return None
        flap_hz = math.nan
        if part.crank_rad is not None:
            flap_hz = mean_flap(part.time_s, part.crank_rad).value
        return Condition(tick, flap_hz, state.mean_rad, state.state, state.settled)

    def _take(self, event: Event) -> list[Verdict]:
        self.timeline.add(event)
        if event.kind == "level":
            self._close_visits()
            self.visits.append(VisitAnalysis(self.timeline.levels[-1]))
        elif not self.visits or self._of_a_level_unread(event):
            return []
        elif event.kind in ("quiet_end", "observe_end"):
            current = self.visits[-1]
            if current.quiet is None and current.visit.quiet:  # none if its beginning could not be read
                look_at_quiet(current, self.store, self.rig)
            return [self._level_verdict(event.tick)]
        elif event.kind in ("tap_end", "release_end"):
            return self._tap(event)
        elif event.kind == "tap_excluded":
            self._exclude(event)
        elif event.kind == "tap_reason":
            self._again(event)
        elif event.kind in ("level_end", "trip", "halt", "finished"):
            return self._close_visits()
        return []

    def _of_a_level_unread(self, event: Event) -> bool:
        """Whether an interval ends at a level whose beginning could not be read."""
        ends = ("quiet_end", "observe_end", "tap_end", "release_end")
        return (
            self.timeline.unread and event.kind in ends and self.visits[-1].visit is not self.timeline.current
        )

    def _tap(self, event: Event) -> list[Verdict]:
        current = self.visits[-1]
        visit = current.visit.ended_by(event)
        if visit is None:
            return []
        if current.quiet is None:
            look_at_quiet(current, self.store, self.rig)
        tap = analyse_tap(self.store, visit, self.rig)
        current.taps.append(tap)
        result = tap.result
        verdict = TapVerdict(
            event.tick,
            result.tap,
            result.level,
            result.returned,
            result.accepted,
            result.reason,
            result.decay_per_s.value,
            result.decay_per_s.std,
        )
        return [verdict, self._level_verdict(event.tick)]

    def _exclude(self, event: Event) -> None:
        """A tap taken back after it was analysed leaves the fit of its level too."""
        for analysis in self._again(event):
            self._fits.pop(self._key(analysis), None)
            if analysis.visit.level in self._closed:
                self._fit(analysis)

    def _again(self, event: Event) -> list[VisitAnalysis]:
        """A tap of which something was told after it was analysed is analysed again; the visits it was in."""
        visit = self.timeline.tap(int(event.data["tap"]))
        found = []
        for analysis in self.visits:
            for index, tap in enumerate(analysis.taps):
                if visit is not None and tap.result.tap == visit.tap:
                    analysis.taps[index] = analyse_tap(self.store, visit, self.rig)
                    found.append(analysis)
        return found

    def _level_verdict(self, tick: int) -> LevelVerdict:
        current = self.visits[-1]
        last = window(self.store, tick - int(self.store.tick_hz), tick)
        state = state_of(last, self.rig) if len(last) >= FEWEST_ROWS else None
        weight = sum(1.0 / tap.fit.decay_std_per_s**2 for tap in current.good if tap.fit is not None)
        half = NORMAL_95 / math.sqrt(weight) if weight > 0.0 else None
        return LevelVerdict(
            tick,
            current.visit.level,
            state.state if state is not None else current.start_state,
            "undetermined",
            half,
        )

    # -- levels ----------------------------------------------------------------------------------------

    def _key(self, analysis: VisitAnalysis) -> Key:
        visit = analysis.visit
        return visit.direction, round(visit.drive_v, 4), visit.role

    def _pools(self) -> dict[Key, list[VisitAnalysis]]:
        pools: dict[Key, list[VisitAnalysis]] = {}
        for analysis in self.visits:
            if analysis.visit.settled_tick is not None or analysis.taps or analysis.quiet is not None:
                pools.setdefault(self._key(analysis), []).append(analysis)
        return pools

    def _close_visits(self) -> list[Verdict]:
        told: list[Verdict] = []
        for analysis in self.visits:
            visit = analysis.visit
            if visit.level in self._closed:
                continue
            self._closed.add(visit.level)
            if visit.end_tick is None:
                visit.end_tick = self.store.last_tick + 1
            if analysis.quiet is None:
                look_at_quiet(analysis, self.store, self.rig)
            look_at_end(analysis, self.store, self.rig)
            self._fit(analysis)
            state, _ = visit_state(analysis)
            pool = self._pools().get(self._key(analysis))
            if pool is None:
                continue
            fit = self._fits.get(self._key(analysis))
            half = NORMAL_95 * fit.decay_std_per_s if fit is not None else None
            row = level_result(pool, fit, self.store, self.rig, self._zero_load())
            told.append(LevelVerdict(visit.end_tick, visit.level, state, row.regime, half))
        return told

    def _fit(self, analysis: VisitAnalysis) -> None:
        key = self._key(analysis)
        pool = self._pools().get(key, [])
        self._fits[key] = fit_visits(pool) if pool else None

    def _zero_load(self) -> tuple[float, float]:
        """Load without drive and its standard uncertainty, from the last zero taken."""
        for event in reversed(self.timeline.zeros):
            load = event.data.get("load_n")
            if load is not None:
                return float(load), float(event.data.get("load_std_n") or 0.0)
        return 0.0, 0.0
