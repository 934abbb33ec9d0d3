"""Walking through the actions of a course, one frame of rows at a time."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from drivers.channels import ChannelTable
from drivers.rows import RowBlock, Status
from rig.description import RigDescription
from rig.events import Event
from rig.run import actions as ac
from rig.run import commands as cm
from rig.run.going_on import from_the_drive
from rig.run.inputs import OperatorInput
from rig.run.knowledge import Knowledge
from rig.run.left_out import LeftOut
from rig.run.zero import ZeroMeans
from rig.verdicts import Verdict

#: Attempts at capture per level for a body on an end stop, rising.
CAPTURE_TRIES = 2
#: How long the verdict of an interval is waited for before going on without it.
VERDICT_S = 2.0


@dataclass(frozen=True)
class Standing:
    """Where a run stands: action number, of how many, level, drive, the body's state, a prompt that waits."""

    action: int
    actions: int
    level: int
    direction: str
    drive_v: float
    body: str
    prompt: str = ""


class Walker:
    """Begins each action, waits for its end, goes on to the next."""

    def __init__(
        self,
        rig: RigDescription,
        course: Sequence[ac.Action],
        channels: ChannelTable,
        tick_hz: int,
        by: str = "",
    ) -> None:
        self._rig = rig
        self._course = tuple(course)
        self._tick_hz = tick_hz
        self._by = by
        self._at = 0
        self._begun: int | None = None  # tick at which the present action began
        self._tick = 0
        self.enabled = False
        self._level: ac.BeginLevel | None = None
        self._from_v = 0.0  # where the drive stood before the present ramp
        self._known = Knowledge()
        self._zero = ZeroMeans(channels)
        self._ended: set[int] = set()  # staircases that are over before their last level
        self._tries = 0
        self._taps = 0
        self._last_tap: tuple[int, ac.Action] | None = None  # level and action of the last tap
        self._left_out = LeftOut()
        self._strike_from: int | None = None  # of the tap now observed
        self._sign = 1.0
        self._acknowledged = False
        self._enough = -1  # the level of which the operator knows enough
        self._asked_tick: int | None = None  # an interval ended; its verdict has not come yet

    @property
    def done(self) -> bool:
        return self._at >= len(self._course)

    @property
    def standing(self) -> Standing:
        action = None if self.done else self._course[self._at]
        prompt = action.text if isinstance(action, ac.Ask) else ""
        level = self._level
        return Standing(
            self._at,
            len(self._course),
            level.level if level else -1,
            level.direction if level else "",
            level.drive_v if level else 0.0,
            self._known.state,
            prompt,
        )

    def advance(
        self,
        block: RowBlock,
        tick: int,
        flap_hz: float,
        verdicts: Sequence[Verdict],
        operator: Sequence[OperatorInput],
        done: Sequence[Event] = (),
    ) -> list[cm.Command]:
        """Commands after one frame."""
        self._tick = tick
        for event in done:
            if event.kind == "release":  # let go only now: the observation begins here
                self._begun = event.tick
        self._known.listen(verdicts)
        if self._known.answered:
            self._asked_tick = None
        made: list[cm.Command] = []
        for one in operator:
            if one.kind == "acknowledge":
                self._acknowledged = True
            elif one.kind == "redo":
                made.extend(self._redo(one.reason))
            elif one.kind == "reject":
                made.extend(self._exclude(one.reason or "rejected by the operator"))
            elif one.kind == "next" and self._level is not None:
                self._enough = self._level.level
        # Several actions may end and begin at one tick: an event, then a ramp.
        while not self.done:
            if self._asked_tick is not None:
                # What comes next may rest on the verdict of the interval that has just ended.
                if tick - self._asked_tick < VERDICT_S * self._tick_hz:
                    break
                self._asked_tick = None
            action = self._course[self._at]
            if action.staircase in self._ended:
                if isinstance(action, ac.EndLevel) and self._level is not None:
                    made.append(self._note("level_end", level=action.level))
                    self._level = None
                self._next()
                continue
            if self._begun is None and self._is_enough(action):
                self._next()
                continue
            if self._begun is None:
                self._begun = tick
                made.extend(self._begin(action))
            finished, more = self._finish(action, block, flap_hz)
            made.extend(more)
            if not finished:
                break
            self._next()
        return made

    @property
    def _waited_s(self) -> float:
        return (self._tick - (self._begun or 0)) / self._tick_hz

    def _next(self) -> None:
        self._at += 1
        self._begun = None
        self._strike_from = None

    def _note(self, kind: str, **data: Any) -> cm.Record:
        return cm.Record(kind, data)

    # -- beginning -------------------------------------------------------------------------------------

    def _begin(self, action: ac.Action) -> list[cm.Command]:
        level = self._level.level if self._level else -1
        match action:
            case ac.GoTo():
                made: list[cm.Command] = []
                if not self.enabled:
                    self.enabled = True
                    made.append(cm.Enable("armed", {"by": self._by}))
                data = {"target_v": action.to_v, "slew_v_per_s": action.slew_v_per_s}
                made.append(cm.Drive("drive", data, action.to_v, action.slew_v_per_s))
                return made
            case ac.BeginLevel():
                self._level = action
                self._known.new_level()
                self._tries = 0
                return [
                    self._note(
                        "level",
                        level=action.level,
                        direction=action.direction,
                        drive_v=action.drive_v,
                        role=action.role,
                    )
                ]
            case ac.EndLevel():
                return self._end_level(action)
            case ac.Watch():
                return [cm.LockDrive(action.kind, {"level": level})]
            case ac.Strike():
                return self._begin_strike(action)
            case ac.LetGo():
                data = {"tap": self._taps, "level": level, "angle_rad": action.angle_rad}
                self._taps += 1
                self._last_tap = (level, action)
                return [cm.LockDrive(), cm.ReleaseBody("release", data, action.angle_rad)]
            case ac.ReadZero():
                self._zero.restart()
            case ac.Ask():
                self._acknowledged = False
                return [cm.PromptOperator("prompt", {"text": action.text}, action.text)]
            case ac.Note():
                return [cm.Record(action.kind, dict(action.data))]
            case ac.Pulse():
                return [cm.SyncPulse("sync", {})]
        return []

    def _begin_strike(self, action: ac.Strike) -> list[cm.Command]:
        impulse = action.impulse_n_m_s
        if action.planned and not self._known.held:
            if not self._worth_trying:
                return []
            self._tries += 1
            middle = 0.5 * (self._rig.stops.low_rad + self._rig.stops.high_rad)
            impulse = math.copysign(impulse, middle - self._known.mean_rad)
        return self._strike(action, impulse)

    @property
    def _worth_trying(self) -> bool:
        """Whether a tap on a body that is not held could capture it."""
        rising = self._level is not None and self._level.direction == "rising"
        away = self._known.state in ("at_stop", "lost")
        return rising and away and self._tries < CAPTURE_TRIES

    def _strike(self, action: ac.Strike | ac.StrikeUntilPrecise, impulse: float) -> list[cm.Command]:
        self._strike_from = self._tick
        self._sign = -self._sign
        number, level = self._taps, self._level.level if self._level else -1
        self._taps += 1
        again = ac.Strike(
            impulse_n_m_s=impulse, observe_s=action.observe_s, by=action.by, staircase=action.staircase
        )
        self._last_tap = (level, again)
        data: dict[str, Any] = {"tap": number, "level": level}
        made: list[cm.Command] = [cm.LockDrive()]
        if action.by == "hand":
            # What a hand gives is measured; the plan only says which way.
            way = "upward" if impulse > 0.0 else "downward"
            text = f"tap now, {way}, gently, with the rod"
            made.append(cm.PromptOperator("prompt", {"text": text}, text))
            made.append(cm.Record("tap", {**data, "impulse_n_m_s": None, "by": "hand"}))
        else:
            made.append(cm.TapBody("tap", {**data, "impulse_n_m_s": impulse, "by": action.by}, impulse))
        return made

    def _is_enough(self, action: ac.Action) -> bool:
        """Whether an action that has not begun is skipped because the operator wants the next level."""
        here = self._level is not None and self._level.level == self._enough
        return here and not isinstance(action, ac.GoTo | ac.BeginLevel | ac.EndLevel)

    def reasons(self, operator: Sequence[OperatorInput]) -> list[cm.Command]:
        """Why taps were left out: that can be told in any state of a run."""
        return [self._left_out.tell(one) for one in operator if one.kind == "reason"]

    def _exclude(self, reason: str) -> list[cm.Command]:
        """Leave the last tap out, once."""
        return [] if self._last_tap is None else self._left_out.exclude(self._taps - 1, reason)

    def _redo(self, reason: str) -> list[cm.Command]:
        """Exclude the last tap, and give it again while its level lasts."""
        excluded = self._exclude(reason or "the operator asked for it again")
        if not excluded or self._last_tap is None:
            return []
        level, again = self._last_tap
        made: list[cm.Command] = []
        action = None if self.done else self._course[self._at]
        if self._strike_from is not None:  # it is still being observed
            made.append(self._tap_end())
            self._strike_from = None
            if isinstance(action, ac.Strike):
                self._begun = None
        elif self._level is not None and self._level.level == level and not self.done:
            # Once more after what goes on now, or before what has not begun.
            at = self._at if self._begun is None else self._at + 1
            self._course = (*self._course[:at], again, *self._course[at:])
        return made + excluded

    # -- after a trip ----------------------------------------------------------------------------------

    def go_back(self) -> None:
        """Begin the level that was broken off again, as a new one at the same drive; the drive is off.

        A lock of the interval that was broken off has ended with the drive, or ends as it is armed.
        """
        self._course, self._at = from_the_drive(self._course, self._at, self._level)
        self._begun = self._strike_from = self._asked_tick = None
        self._level = None
        self._from_v = 0.0
        self.enabled = False

    # -- ending ----------------------------------------------------------------------------------------

    def _finish(self, action: ac.Action, block: RowBlock, flap_hz: float) -> tuple[bool, list[cm.Command]]:
        level = self._level.level if self._level else -1
        match action:
            case ac.GoTo():
                # The board tells when its register has arrived; a frame on its way may not know of the ramp.
                due_s = abs(action.to_v - self._from_v) / action.slew_v_per_s
                arrived = self._waited_s >= 0.98 * due_s and not block.status & Status.RAMPING
                if arrived and self._tick > (self._begun or 0):
                    self._from_v = action.to_v
                    return True, []
                return False, []
            case ac.Wait():
                return self._waited_s >= action.for_s, []
            case ac.Settle():
                settled = self._known.settled_tick >= (self._begun or 0) + int(action.least_s * self._tick_hz)
                if settled or self._waited_s >= action.most_s:
                    waited = round(self._waited_s, 3)
                    return True, [self._note("settled", level=level, settled=settled, waited_s=waited)]
                return False, []
            case ac.Watch():
                if self._waited_s >= action.for_s:
                    return True, [self._interval_end(f"{action.kind}_end", level=level)]
                return False, []
            case ac.Strike():
                if self._strike_from is None:
                    return True, []  # skipped
                return self._struck(action.observe_s)
            case ac.StrikeUntilPrecise():
                return self._until_precise(action)
            case ac.LetGo():
                if self._waited_s >= action.observe_s:
                    return True, [self._interval_end("release_end", tap=self._taps - 1, level=level)]
                return False, []
            case ac.ReadZero():
                return self._read_zero(action, block, flap_hz)
            case ac.Ask():
                if self._acknowledged or self._waited_s >= action.most_s:
                    data = {"text": action.text, "waited_s": round(self._waited_s, 3)}
                    return True, [cm.Record("acknowledged", {**data, "in_time": self._acknowledged})]
                return False, []
        return True, []

    def _tap_end(self) -> cm.UnlockDrive:
        level = self._level.level if self._level else -1
        return self._interval_end("tap_end", tap=self._taps - 1, level=level)

    def _interval_end(self, kind: str, **data: Any) -> cm.UnlockDrive:
        if self._level is not None:
            self._asked_tick = self._tick
            self._known.ask()
        return cm.UnlockDrive(kind, data)

    def _struck(self, observe_s: float) -> tuple[bool, list[cm.Command]]:
        since_s = (self._tick - (self._strike_from or 0)) / self._tick_hz
        return (True, [self._tap_end()]) if since_s >= observe_s else (False, [])

    def _until_precise(self, action: ac.StrikeUntilPrecise) -> tuple[bool, list[cm.Command]]:
        if self._strike_from is None:  # between taps: the verdict on the last one has come
            width = self._known.half_width_per_s
            known = width is not None and width <= action.precision_per_s
            nothing_to_learn = self._known.state != "" and not self._known.held
            if known or nothing_to_learn or self._waited_s >= action.most_s:
                return True, []
            return False, self._strike(action, self._sign * action.impulse_n_m_s)
        finished, made = self._struck(action.observe_s)
        if finished:
            self._strike_from = None
        return False, made

    def _read_zero(
        self, action: ac.ReadZero, block: RowBlock, flap_hz: float
    ) -> tuple[bool, list[cm.Command]]:
        if flap_hz >= self._rig.limits.standstill_hz:
            self._begun = self._tick  # wait for standstill first
            return False, []
        self._zero.add(block)
        if self._waited_s < action.for_s:
            return False, []
        return True, [cm.Record("zero", dict(self._zero.means()))]

    def _end_level(self, action: ac.EndLevel) -> list[cm.Command]:
        level = self._level
        self._level = None
        stop_after = level.stop_after_lost if level is not None else 0
        if level is not None and stop_after and self._known.enough_lost(level.direction, stop_after):
            self._ended.add(level.staircase)
        return [self._note("level_end", level=action.level)]
