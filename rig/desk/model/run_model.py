"""What a run has come to, from the messages of a bench process or of a replay.

`take` one message after another (see `rig.bench.control`); it answers which parts have changed, so that a display
redraws no more than it must.
"""

from __future__ import annotations

from typing import Any

from rig.desk.model.notices import notice_words
from rig.desk.model.rungs import Rung, TapMark, Tripped

Fields = dict[str, Any]

#: What the run is doing, in the words shown. A shape stands beside each word, so that nothing rests on colour.
PHASES = {
    "idle": "no run",
    "starting": "getting ready",
    "ready": "ready",
    "running": "running",
    "stopping": "ramping down",
    "turning": "off, still turning",
    "waiting": "off, waiting for you",
    "finished": "finished",
    "failed": "not started",
}

#: Parts that may have changed.
PHASE, STANDING, LEVELS, TAP, MAP, TRIP, PROMPT, OUTCOME = (
    "phase",
    "standing",
    "levels",
    "tap",
    "map",
    "trip",
    "prompt",
    "outcome",
)
Changed = set[str]
EVERYTHING: Changed = {PHASE, STANDING, LEVELS, TAP, MAP, TRIP, PROMPT, OUTCOME}


class RunModel:
    """The state of one run."""

    def __init__(self) -> None:
        self.phase = "idle"
        self.tick_hz = 1_000_000
        self.origin_tick: int | None = None
        self.tick = 0
        self.time_s = 0.0
        self.flap_hz: float | None = None
        self.mean_angle_rad: float | None = None
        self.body = ""
        self.bench = ""
        self.ring = ""
        self.channels: list[str] = []
        self.standing: Fields = {}
        self.margins: list[Fields] = []
        self.free_bytes: int | None = None
        self.lost_rows = 0
        self.lost_frames = 0
        self.rungs: list[Rung] = []
        self.trips: list[Tripped] = []
        self.prompt = ""
        self.notes: list[tuple[int, str]] = []  # marks, refusals and notices, with their ticks
        self.pictures: dict[int, Fields] = {}  # by number of the tap
        self.last_tap: int | None = None
        self.unexplained: int | None = None  # the tap just left out, while a reason for it is asked for
        self.map: Fields = {}
        self.theory: Fields = {}
        self.exit_code: int | None = None
        self.reason = ""
        self.session = ""
        self.closed = False  # nothing more comes: the session is sealed, or will not be
        self.sounds: list[str] = []  # tap, accepted, double, lost, trip: taken away by whoever sounds them

    # -- reading ---------------------------------------------------------------------------------------

    @property
    def word(self) -> str:
        """The run's state in a word or two."""
        return PHASES[self.phase]

    @property
    def may_be_driven(self) -> bool:
        """Whether the drive may be on: what the halt control is for."""
        return self.phase in ("starting", "ready", "running", "stopping")

    @property
    def on_hand(self) -> Rung | None:
        """The level the run is at, if any."""
        return self.rungs[-1] if self.rungs and not self.rungs[-1].ended else None

    def seconds(self, tick: int) -> float:
        """Board time of a tick since the run's first row, s."""
        return (tick - (self.origin_tick or 0)) / self.tick_hz

    def tap(self, number: int) -> TapMark | None:
        for rung in reversed(self.rungs):
            for mark in rung.taps:
                if mark.tap == number:
                    return mark
        return None

    # -- taking ----------------------------------------------------------------------------------------

    def take(self, line: Fields) -> Changed:
        """One message; which parts it changed."""
        for kind, take in (
            ("standing", self._standing),
            ("event", self._event),
            ("verdict", self._verdict),
            ("picture", self._picture),
            ("prompt", self._prompt),
            ("refused", self._refused),
            ("ready", self._ready),
            ("stopped", self._stopped),
            ("done", self._done),
            ("failed", self._failed),
        ):
            if kind in line:
                return take(line[kind])
        return set()

    def start(self) -> Changed:
        """A run has been asked for."""
        self.phase = "starting"
        return {PHASE}

    def _ready(self, told: Fields) -> Changed:
        self.phase = "ready"
        self.bench = str(told.get("bench", ""))
        self.ring = str(told.get("ring", ""))
        self.channels = list(told.get("channels", []))
        self.tick_hz = int(told.get("tick_hz", self.tick_hz))
        return {PHASE}

    def _standing(self, told: Fields) -> Changed:
        self.time_s = float(told["time_s"])
        self.tick = int(told["tick"])
        self.origin_tick = self.tick - round(self.time_s * self.tick_hz)
        self.standing = told["standing"]
        self.flap_hz = told.get("flap_hz")
        self.margins = told.get("margins", self.margins)
        self.free_bytes = told.get("free_bytes", self.free_bytes)
        changed = {STANDING}
        state = str(told.get("run_state", self.phase))
        if state != self.phase and state in PHASES and self.phase not in ("finished", "failed"):
            self.phase = state
            changed.add(PHASE)
        if self.prompt and not self.standing.get("prompt") and self._asked:
            self.prompt = ""
            changed.add(PROMPT)
        return changed

    _asked = False  # the prompt shown waits for an answer

    def _prompt(self, text: str) -> Changed:
        self.prompt = str(text)
        self._asked = False
        if self.prompt.startswith("tap now"):
            self.sounds.append("tap")
        return {PROMPT}

    def _event(self, event: Fields) -> Changed:
        take = getattr(self, f"_on_{event['kind']}", None)
        changed: Changed = take(event) if take is not None else set()
        return changed

    def _on_run(self, event: Fields) -> Changed:
        if self.origin_tick is None:
            self.origin_tick = int(event["tick"])
        return self._go("running")

    def _on_level(self, event: Fields) -> Changed:
        self.unexplained = None
        self.rungs.append(
            Rung(
                int(event["level"]),
                str(event["direction"]),
                float(event["drive_v"]),
                str(event.get("role", "level")),
                int(event["tick"]),
            )
        )
        return {LEVELS}

    def _on_settled(self, event: Fields) -> Changed:
        if self.rungs:
            self.rungs[-1].settled = bool(event.get("settled"))
        return {LEVELS}

    def _on_level_end(self, event: Fields) -> Changed:
        for rung in self.rungs:
            if rung.level == event["level"]:
                rung.ended = True
        return {LEVELS}

    def _on_tap(self, event: Fields) -> Changed:
        mark = TapMark(
            int(event["tap"]),
            int(event["level"]),
            int(event["tick"]),
            str(event.get("by", "")),
            event.get("impulse_n_m_s"),
        )
        if self.rungs:
            self.rungs[-1].taps.append(mark)
        self.last_tap = mark.tap
        return {LEVELS, TAP}

    def _on_release(self, event: Fields) -> Changed:
        return self._on_tap({**event, "by": "release"})

    def _on_tap_end(self, event: Fields) -> Changed:
        if self.prompt.startswith("tap now"):
            self.prompt = ""
            return {PROMPT}
        return set()

    def _on_tap_excluded(self, event: Fields) -> Changed:
        mark = self.tap(int(event["tap"]))
        if mark is not None:
            mark.outcome, mark.reason = "excluded", str(event.get("reason", ""))
            self.unexplained = mark.tap
        return {LEVELS, TAP}

    def _on_tap_reason(self, event: Fields) -> Changed:
        mark = self.tap(int(event["tap"]))
        if mark is not None and mark.outcome == "excluded":
            mark.reason = str(event["reason"])
            if self.unexplained == mark.tap:
                self.unexplained = None
        return {LEVELS, TAP}

    def _on_prompt(self, event: Fields) -> Changed:
        self.prompt = str(event["text"])
        self._asked = not self.prompt.startswith("tap now")
        return {PROMPT}

    def _on_acknowledged(self, event: Fields) -> Changed:
        self.prompt = ""
        return {PROMPT}

    def _on_trip(self, event: Fields) -> Changed:
        self.trips.append(Tripped(int(event["tick"]), str(event["cause"]), str(event["sentence"])))
        self.sounds.append("trip")
        return {TRIP}

    def _on_halt(self, event: Fields) -> Changed:
        self.prompt = ""
        if self.rungs:
            self.rungs[-1].ended = True
        return self._go("stopping") | {LEVELS, PROMPT}

    def _on_turning(self, event: Fields) -> Changed:
        return self._go("turning")

    def _on_waiting(self, event: Fields) -> Changed:
        return self._go("waiting")

    def _on_rearmed(self, event: Fields) -> Changed:
        self.trips.clear()
        return self._go("running") | {TRIP}

    def _on_refused(self, event: Fields) -> Changed:
        return self._note(event, str(event["reason"]))

    def _refused(self, words: str) -> Changed:
        return self._note({"tick": self.tick}, str(words))

    def _on_mark(self, event: Fields) -> Changed:
        return self._note(event, str(event.get("text", "")))

    def _on_notice(self, event: Fields) -> Changed:
        words = notice_words(event)
        return self._note(event, words) if words else set()

    def _on_loss(self, event: Fields) -> Changed:
        self.lost_rows += int(event.get("rows", 0))
        self.lost_frames += int(event.get("frames", 0))
        return {STANDING}

    def _on_finished(self, event: Fields) -> Changed:
        self.exit_code, self.reason = int(event["exit_code"]), str(event["reason"])
        return self._go("finished") | {OUTCOME}

    def _note(self, event: Fields, words: str) -> Changed:
        self.notes.append((int(event["tick"]), words))
        return {STANDING}

    def _go(self, phase: str) -> Changed:
        self.phase = phase
        return {PHASE}

    def _verdict(self, told: Fields) -> Changed:
        if told["kind"] == "condition":
            self.mean_angle_rad = told["mean_angle_rad"]
            self.body = str(told["state"])
            here = self.on_hand
            if here is not None and told["tick"] > here.tick:
                here.flap_hz = told["flap_hz"]
                here.state = here.state or self.body
                return {STANDING, LEVELS}
            return {STANDING}
        if told["kind"] == "tap":
            return self._tap_verdict(told)
        for rung in self.rungs:
            if rung.level == told["level"]:
                rung.state, rung.regime = str(told["state"]), str(told["regime"])
                rung.half_width_per_s = told["decay_half_width_per_s"]
        return {LEVELS}

    def _tap_verdict(self, told: Fields) -> Changed:
        mark = self.tap(int(told["tap"]))
        if mark is None:
            return set()
        mark.decay_per_s, mark.decay_std_per_s = told["decay_per_s"], told["decay_std_per_s"]
        if self.unexplained is not None and mark.tap > self.unexplained:
            self.unexplained = None
        if mark.outcome != "excluded":  # what the operator said holds, also against a verdict that came late
            mark.reason = str(told["reason"])
            if told["accepted"]:
                mark.outcome = "accepted"
            elif not told["returned"]:
                mark.outcome = "lost"
            else:
                mark.outcome = "double" if mark.reason.startswith("struck") else "left_out"
            self.sounds.append(mark.outcome if mark.outcome != "left_out" else "double")
        return {LEVELS, TAP}

    def _picture(self, told: Fields) -> Changed:
        if "tap" in told:
            picture = told["tap"]
            self.last_tap = int(picture["tap"]["tap"])
            self.pictures[self.last_tap] = picture
            return {TAP}
        if "map" in told:
            self.map = told["map"]
            return {MAP}
        if "theory" in told:
            self.theory = told["theory"]
            return {MAP}
        return set()

    def _stopped(self, told: Fields) -> Changed:
        self.exit_code, self.reason = int(told["exit_code"]), str(told["reason"])
        return {OUTCOME}

    def _done(self, told: Fields) -> Changed:
        self.session = str(told.get("session", ""))
        self.closed = True
        return self._stopped(told) | self._go("finished")

    def _failed(self, told: Fields) -> Changed:
        self.closed = True
        return self._stopped(told) | self._go(
            "failed" if not self.rungs and self.origin_tick is None else "finished"
        )
