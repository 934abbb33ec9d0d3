"""A stored session played again into a `RunModel`: by time, event and tap, at any speed, without working it out anew.

What the run told is in the session: events, verdicts, results. So a jump costs nothing but going through them.
"""

from __future__ import annotations

import bisect
import math
from collections.abc import Sequence
from typing import Any

from rig.desk.model.run_model import Changed, RunModel
from rig.evaluation.comparison import told_verdicts
from rig.evaluation.stream import RowStore
from rig.evaluation.theory_picture import theory_picture
from rig.evaluation.timeline import Timeline
from rig.events import Event
from rig.session import Session

Fields = dict[str, Any]
#: Rows looked at before a tap, for its rest; more than the analysis of a tap uses.
REST_S = 1.5
SLOWEST, FASTEST = 0.1, 1000.0
THEORY_TOP = 0.75


class ReplayModel:
    """A session at a moment. `model` is what a window draws, `position_s` the board time since the first row."""

    def __init__(self, session: Session) -> None:
        self.session = session
        self.stream = session.streams["board"]
        self.rig = session.rig
        self.duration_s = self.stream.duration_s
        self.position_s = 0.0
        self.speed = 1.0
        self.playing = False
        self.model = RunModel()
        self._lines = _lines(session.events, told_verdicts(session.results["live"]) or [])
        self._ticks = [tick for tick, _ in self._lines]
        self._at = 0  # lines given to the model
        self._taps: dict[int, Fields] = {}
        self._results: Fields = session.results["final"] or {}
        self._theory = theory_picture(self.rig, THEORY_TOP * self.rig.limits.flap_hz)
        self._timeline = Timeline()
        for event in session.events:
            self._timeline.add(event)
        self.seek(0.0)

    # -- places ----------------------------------------------------------------------------------------

    def seconds(self, tick: int) -> float:
        return (tick - self.stream.first_tick) / self.stream.tick_hz

    def events(self) -> list[tuple[float, str]]:
        """All events worth a jump, with the time of each, s."""
        return [(self.seconds(event.tick), _words(event)) for event in self.session.events]

    def taps(self) -> list[tuple[int, float]]:
        """Numbers and times of all taps, s."""
        found = []
        for event in self.session.events:
            if event.kind in ("tap", "release") and "tap" in event.data:
                found.append((int(event.data["tap"]), self.seconds(event.tick)))
        return found

    # -- moving ----------------------------------------------------------------------------------------

    def advance(self, elapsed_s: float) -> Changed:
        """Real time has passed while playing; what changed."""
        if not self.playing:
            return set()
        position_s = self.position_s + elapsed_s * self.speed
        if position_s >= self.duration_s:
            self.playing = False
        return self._to(min(position_s, self.duration_s))

    def seek(self, position_s: float) -> Changed:
        """Jump; what changed (everything, for a jump back)."""
        position_s = min(max(position_s, 0.0), self.duration_s)
        if position_s < self.position_s or self._at == 0:
            self.model = RunModel()
            self.model.tick_hz = self.stream.tick_hz
            self.model.origin_tick = self.stream.first_tick
            self.model.channels = [channel.name for channel in self.stream.channels]
            self.model.theory = self._theory
            self.model.pictures = dict(self._taps)
            self._at = 0
            return self._to(position_s) | {
                "phase",
                "standing",
                "levels",
                "tap",
                "map",
                "trip",
                "prompt",
                "outcome",
            }
        return self._to(position_s)

    def step(self, places_s: Sequence[float], direction: int) -> Changed:
        """Jump to the next (+1) or previous (-1) of some places."""
        ordered = sorted(places_s)
        if direction > 0:
            at = bisect.bisect_right(ordered, self.position_s + 1e-6)
            return self.seek(ordered[at]) if at < len(ordered) else set()
        at = bisect.bisect_left(ordered, self.position_s - 1e-6) - 1
        return self.seek(ordered[at]) if at >= 0 else set()

    def _to(self, position_s: float) -> Changed:
        self.position_s = position_s
        tick = self.stream.first_tick + int(position_s * self.stream.tick_hz)
        end = bisect.bisect_right(self._ticks, tick)
        changed: Changed = {"standing"}
        for _, line in self._lines[self._at : end]:
            changed |= self.model.take(line)
        self._at = end
        self.model.tick, self.model.time_s = tick, position_s
        self.model.sounds.clear()  # nobody is called to tap by a replay
        here = self.model.on_hand
        self.model.flap_hz = here.flap_hz if here is not None else None
        if "levels" in changed or not self.model.map:
            self.model.map = self._map(tick)
            changed.add("map")
        return changed

    # -- pictures --------------------------------------------------------------------------------------

    def _map(self, tick: int) -> Fields:
        """The stored results as far as they were known at a tick; the boundary only once the run is over."""
        ended = {(rung.direction, round(rung.drive_v, 4)) for rung in self.model.rungs if rung.ended}
        levels = [level for level in self._results.get("levels", []) if _place(level, ended)]
        over = self.model.phase == "finished" or not self.model.rungs
        boundary = self._results.get("boundary", {}) if over else {}
        nothing = {"kind": "not_located"}
        return {
            "levels": levels,
            "falling": boundary.get("falling", nothing),
            "rising": boundary.get("rising", nothing),
            "fit_curve": [],
        }

    def keep_picture(self, number: int, picture: Fields) -> None:
        """A picture that was made elsewhere: from now on it is there, wherever the replay is."""
        self._taps[number] = self.model.pictures[number] = picture

    def picture(self, number: int) -> Fields | None:
        """The picture of a tap, fitted when first asked for; None if there is no such tap."""
        # Late: the fits take a second to load, and a session is to be there at once.
        from rig.evaluation.pictures import BEFORE_S, tap_picture
        from rig.evaluation.tap import analyse_tap

        if number not in self._taps:
            visit = self._timeline.tap(number)
            if visit is None:
                return None
            hz = self.stream.tick_hz
            end = visit.end_tick if visit.end_tick is not None else visit.tick + 3 * hz
            store = RowStore(self.stream.channels, hz)
            store.append(self.stream.part(visit.tick - int((REST_S + BEFORE_S) * hz), end + hz // 2))
            if not len(store):
                return None
            self._taps[number] = tap_picture(store, analyse_tap(store, visit, self.rig))
        return self._taps[number]


def _lines(events: Sequence[Event], verdicts: Sequence[Fields]) -> list[tuple[int, Fields]]:
    """Events and verdicts as messages in order of tick; at one tick the event comes first."""
    lines = [(event.tick, 0, {"event": event.to_json()}) for event in events]
    lines += [(int(verdict["tick"]), 1, {"verdict": verdict}) for verdict in verdicts]
    lines.sort(key=lambda line: line[:2])
    return [(tick, line) for tick, _, line in lines]


def _place(level: Fields, ended: set[tuple[str, float]]) -> bool:
    drive = level["drive_v"]["value"]
    volts = math.nan if drive is None else float(drive)
    # The told drive is the measured voltage, the level's name the one asked for.
    return any(direction == level["direction"] and abs(asked - volts) < 0.1 for direction, asked in ended)


def _words(event: Event) -> str:
    data = event.data
    match event.kind:
        case "level":
            return f"level {data['drive_v']:.2f} V {data['direction']}"
        case "tap" | "release":
            return f"{event.kind} {data.get('tap', '')}"
        case "trip":
            return f"trip: {data['cause']}"
        case "halt":
            return f"halt: {data.get('cause', '')}"
        case "mark":
            return f"mark: {data.get('text', '')}"
    return event.kind.replace("_", " ")
