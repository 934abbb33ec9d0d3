"""From the steps of a protocol to the flat list of actions the runner walks through."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from rig.run import actions as ac
from rig.steps import (
    Hold,
    Mark,
    Observe,
    Prompt,
    Protocol,
    Ramp,
    Release,
    Repeat,
    Staircase,
    Step,
    Sync,
    Tap,
    Zero,
)

#: A level made by single steps (ramp, then hold, tap ...) settles like one of a staircase by default.
SINGLE_SETTLE_S = (1.0, 10.0)


class Course:
    """Expands steps; keeps count of levels and of where the drive stands."""

    def __init__(self, default_slew_v_per_s: float) -> None:
        self._slew = default_slew_v_per_s
        self._levels = 0
        self._staircases = 0
        self._drive_v = 0.0
        self._open: int | None = None  # level made by single steps that is still open

    def actions(self, protocol: Protocol) -> tuple[ac.Action, ...]:
        made = list(self._steps(protocol.steps))
        made.extend(self._end_level())
        return tuple(made)

    def _steps(self, steps: Sequence[Step]) -> Iterator[ac.Action]:
        for step in steps:
            if isinstance(step, Repeat):
                for _ in range(step.times):
                    yield from self._steps(step.steps)
            elif isinstance(step, Staircase):
                yield from self._end_level()
                yield from self._staircase(step)
            else:
                yield from self._single(step)

    def _single(self, step: Step) -> Iterator[ac.Action]:
        if isinstance(step, Ramp):
            yield from self._end_level()
            direction = "rising" if step.to_v >= self._drive_v else "falling"
            yield self._go_to(step.to_v, step.slew_v_per_s)
            if step.to_v > 0.0:
                yield from self._begin_level(direction, "step")
        elif isinstance(step, Hold):
            yield from self._hold(step)
        elif isinstance(step, Tap):
            yield ac.Strike(impulse_n_m_s=step.impulse_n_m_s, observe_s=step.observe_s, by=step.by)
        elif isinstance(step, Release):
            yield ac.LetGo(angle_rad=step.angle_rad, observe_s=step.observe_s)
        elif isinstance(step, Observe):
            yield ac.Watch(for_s=step.for_s, kind="observe")
        elif isinstance(step, Mark):
            yield ac.Note(kind="mark", data={"text": step.text})
        elif isinstance(step, Sync):
            yield ac.Pulse()
        elif isinstance(step, Zero):
            yield from self._end_level()
            if self._drive_v > 0.0:
                yield self._go_to(0.0, None)
            yield ac.ReadZero(for_s=step.for_s)
        elif isinstance(step, Prompt):
            yield ac.Ask(text=step.text, most_s=step.at_most_s)
        else:
            raise TypeError(f"no course for a {type(step).__name__} step")

    def _hold(self, step: Hold) -> Iterator[ac.Action]:
        if step.for_s is not None:
            yield ac.Wait(for_s=step.for_s)
        elif step.until == "precise" and step.precision_per_s is not None:
            yield ac.StrikeUntilPrecise(
                impulse_n_m_s=step.impulse_n_m_s or 1e-4,
                observe_s=step.tap_observe_s,
                by=step.by,
                precision_per_s=step.precision_per_s,
                most_s=step.at_most_s,
            )
        else:
            yield ac.Settle(least_s=SINGLE_SETTLE_S[0], most_s=step.at_most_s)

    def _staircase(self, step: Staircase) -> Iterator[ac.Action]:
        number = self._staircases
        self._staircases += 1
        roles = step.roles or ("level",) * len(step.levels_v)
        for volts, direction, role in zip(step.levels_v, step.directions, roles, strict=True):
            yield self._go_to(volts, step.slew_v_per_s, number)
            level = self._levels
            self._levels += 1
            yield ac.BeginLevel(
                level=level,
                direction=direction,
                drive_v=volts,
                role=role,
                stop_after_lost=step.stop_after_lost,
                staircase=number,
            )
            most = max(step.settle_at_most_s, step.settle_s)
            yield ac.Settle(least_s=step.settle_s, most_s=most, staircase=number)
            if step.quiet_s > 0.0:
                yield ac.Watch(for_s=step.quiet_s, kind="quiet", staircase=number)
            for impulse in step.taps_n_m_s:
                yield ac.Strike(
                    impulse_n_m_s=impulse,
                    observe_s=step.tap_observe_s,
                    by=step.by,
                    planned=True,
                    staircase=number,
                )
            if step.precision_per_s is not None and step.taps_n_m_s:
                yield ac.StrikeUntilPrecise(
                    impulse_n_m_s=step.taps_n_m_s[0],
                    observe_s=step.tap_observe_s,
                    by=step.by,
                    precision_per_s=step.precision_per_s,
                    most_s=60.0,
                    staircase=number,
                )
            yield ac.EndLevel(level=level, staircase=number)

    def _go_to(self, volts: float, slew: float | None, staircase: int = -1) -> ac.GoTo:
        self._drive_v = volts
        return ac.GoTo(to_v=volts, slew_v_per_s=slew or self._slew, staircase=staircase)

    def _begin_level(self, direction: str, role: str) -> Iterator[ac.Action]:
        self._open = self._levels
        self._levels += 1
        yield ac.BeginLevel(level=self._open, direction=direction, drive_v=self._drive_v, role=role)

    def _end_level(self) -> Iterator[ac.Action]:
        if self._open is not None:
            yield ac.EndLevel(level=self._open)
            self._open = None


def course(protocol: Protocol, default_slew_v_per_s: float) -> tuple[ac.Action, ...]:
    """All actions of a protocol in order; the drive is not yet switched on or off by them."""
    return Course(default_slew_v_per_s).actions(protocol)
