"""A dry run before power: how long, how hot, how fast, and which limits would be crossed.

The motor is taken at its steady state (torque balance over a turn); the winding with the model that also guards
the run (`rig.run.winding`). It is a forecast from the constants of the rig file, not a measurement.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from analysis.averaged import equilibrium
from analysis.mechanism.parameters import Mechanism
from analysis.mechanism.steady import load_torque_n_m, steady_flap_hz
from rig.description import RigDescription
from rig.files.precision import planned_half_width_per_s
from rig.run import actions as ac
from rig.run.course import course
from rig.run.winding import WindingModel
from rig.steps import Protocol

TWO_PI = 2.0 * math.pi
THERMAL_STEP_S = 0.5


@dataclass(frozen=True)
class LevelForecast:
    """One level: drive, start in s, flap rate, current, winding temperature at its end, precision of the decay."""

    direction: str
    drive_v: float
    start_s: float
    flap_hz: float | None
    current_a: float | None
    winding_deg_c: float | None
    taps: int
    decay_half_width_per_s: float | None


@dataclass(frozen=True)
class Forecast:
    """What a protocol will do on a rig; `crossings` are sentences about limits it would cross."""

    duration_s: float
    at_most_s: float
    levels: tuple[LevelForecast, ...]
    hottest_deg_c: float | None
    top_flap_hz: float | None
    coast_down_s: float | None
    crossings: tuple[str, ...]


def coast_down_s(mechanism: Mechanism, flap_hz: float, standstill_hz: float) -> float:
    """Time from a flap rate to standstill with open terminals."""
    inertia = mechanism.flywheel_inertia_kg_m2 + 0.5 * (
        mechanism.shuttle_mass_kg * mechanism.shuttle_throw_m**2
        + mechanism.wing_inertia_kg_m2 * mechanism.wing_stroke_rad**2
    )
    rates = np.linspace(TWO_PI * flap_hz, max(TWO_PI * standstill_hz, 0.05), 400)
    slowing = np.array([load_torque_n_m(mechanism, float(rate)) for rate in rates]) / inertia
    return float(np.trapezoid(1.0 / np.maximum(slowing, 1e-9), -rates))


def forecast(rig: RigDescription, protocol: Protocol) -> Forecast:
    """Dry run of a protocol on a rig."""
    walk = _Walk(rig)
    for action in course(protocol, rig.limits.slew_v_per_s):
        walk.take(action)
    walk.close()
    mechanism = None if rig.unknown else rig.mechanism
    flaps = [level.flap_hz for level in walk.levels if level.flap_hz is not None]
    top = max(flaps) if flaps else None
    coast = coast_down_s(mechanism, top, rig.limits.standstill_hz) if mechanism is not None and top else None
    return Forecast(
        walk.now_s + (walk.drive_v / rig.limits.slew_v_per_s) + (coast or 0.0),
        walk.most_s + (walk.drive_v / rig.limits.slew_v_per_s) + (coast or 0.0),
        tuple(walk.levels),
        walk.hottest,
        top,
        coast,
        tuple(dict.fromkeys(walk.crossings)),
    )


class _Walk:
    """Follows the actions with time, drive and heat."""

    def __init__(self, rig: RigDescription) -> None:
        self.rig = rig
        self.now_s = self.most_s = self.drive_v = 0.0
        self.levels: list[LevelForecast] = []
        self.crossings: list[str] = []
        self._mechanism = None if rig.unknown else rig.mechanism
        start = rig.world.winding_start_deg_c if rig.world is not None else None
        self._winding = WindingModel(rig.motor, rig.limits.winding_deg_c, start) if rig.motor else None
        self.hottest = self._winding.winding_deg_c if self._winding else None
        self._open: tuple[ac.BeginLevel, float, list[tuple[float, float]]] | None = None

    def take(self, action: ac.Action) -> None:
        match action:
            case ac.GoTo():
                self._pass(abs(action.to_v - self.drive_v) / action.slew_v_per_s)
                self._ramp_current(action)
                self.drive_v = action.to_v
            case ac.BeginLevel():
                self.close()
                self._open = (action, self.now_s, [])
            case ac.EndLevel():
                self.close()
            case ac.Wait() | ac.Watch():
                self._pass(action.for_s)
            case ac.Settle():
                least = action.least_s if self._held else action.most_s
                self._pass(least, action.most_s)
            case ac.Strike():
                # A body that is not held is not tapped, but for a few tries to capture it.
                skipped = action.planned and not self._held
                self._tap(action.impulse_n_m_s, action.observe_s, skipped)
            case ac.StrikeUntilPrecise():
                self._tap(action.impulse_n_m_s, action.observe_s, not self._held, action.most_s)
            case ac.LetGo():
                self._pass(action.observe_s + 0.5)
            case ac.ReadZero():
                self._pass(action.for_s)
            case ac.Ask():
                self._pass(action.most_s)

    def close(self) -> None:
        """End the level that is open."""
        if self._open is None:
            return
        begun, start_s, taps = self._open
        self._open = None
        flap = amps = None
        hot = self._winding.winding_deg_c if self._winding else 25.0
        if self._mechanism is not None:
            flap, amps = steady_flap_hz(self._mechanism, begun.drive_v, hot)
            limits = self.rig.limits
            if flap > limits.flap_hz:
                self.crossings.append(
                    f"at {begun.drive_v:g} V the flap rate would be {flap:.1f} Hz, above {limits.flap_hz:g} Hz"
                )
        self.levels.append(
            LevelForecast(
                begun.direction,
                begun.drive_v,
                start_s,
                flap,
                amps,
                self._winding.winding_deg_c if self._winding else None,
                len(taps),
                planned_half_width_per_s(self.rig, flap, taps) if flap else None,
            )
        )

    @property
    def _held(self) -> bool:
        """Whether theory has the body held at the present drive; taken as held where it cannot be told."""
        if self._mechanism is None:
            return True
        hot = self._winding.winding_deg_c if self._winding else 25.0
        return equilibrium(self._mechanism, steady_flap_hz(self._mechanism, self.drive_v, hot)[0]) is not None

    def _tap(self, impulse: float, observe_s: float, skipped: bool, most_s: float | None = None) -> None:
        if self._open is not None and not skipped:
            self._open[2].append((impulse, observe_s))
        self._pass(0.0 if skipped else observe_s, observe_s if most_s is None else most_s)

    def _ramp_current(self, action: ac.GoTo) -> None:
        """Extra current to speed the flywheel up: J dOmega/dt over the motor's constant."""
        mechanism = self._mechanism
        if mechanism is None or action.to_v <= self.drive_v:
            return
        constant = mechanism.motor_constant_n_m_per_a * mechanism.gear_ratio
        extra = mechanism.flywheel_inertia_kg_m2 * action.slew_v_per_s / constant**2
        _, steady = steady_flap_hz(mechanism, action.to_v)
        if steady + extra > self.rig.limits.current_a:
            self.crossings.append(
                f"a ramp of {action.slew_v_per_s:g} V/s to {action.to_v:g} V would take {steady + extra:.1f} A, "
                f"above {self.rig.limits.current_a:g} A"
            )

    def _pass(self, time_s: float, most_s: float | None = None) -> None:
        self.now_s += time_s
        self.most_s += time_s if most_s is None else most_s
        if self._winding is None or self._mechanism is None or self.hottest is None:
            return
        motor = self.rig.motor
        assert motor is not None
        slow_s = 0.05 * motor.housing_capacity_j_per_k * motor.housing_ambient_k_per_w
        left = time_s
        while left > 1e-9:
            # At a constant drive the winding settles: the longer it lasts, the longer the steps may be.
            wanted = max(THERMAL_STEP_S, min(0.02 * (time_s - left), slow_s))
            step = min(wanted, left)
            amps = steady_flap_hz(self._mechanism, self.drive_v, self._winding.winding_deg_c)[1]
            self.hottest = max(self.hottest, self._winding.add(amps**2, step))
            left -= step
        limit = self.rig.limits.winding_deg_c
        if self.hottest > limit:
            self.crossings.append(
                f"the winding would pass {limit:g} degC, about {self.now_s:.0f} s into the run"
            )


def forecast_lines(told: Forecast) -> list[str]:
    """A forecast as lines for a terminal."""
    lines = [f"about {told.duration_s / 60.0:.1f} min, at most {told.at_most_s / 60.0:.1f} min"]
    if told.levels:
        lines.append(
            "  start s  direction  drive V  flap Hz  current A  winding degC  taps  decay at best +- 1/s"
        )
    for level in told.levels:
        cells = (
            f"{level.start_s:9.0f}",
            f"{level.direction:<9}",
            f"{level.drive_v:7.2f}",
            _cell(level.flap_hz, 7, 2),
            _cell(level.current_a, 9, 2),
            _cell(level.winding_deg_c, 12, 1),
            f"{level.taps:4d}",
            _cell(level.decay_half_width_per_s, 20, 3),
        )
        lines.append("  ".join(cells))
    if told.top_flap_hz is not None:
        lines.append(f"top flap rate {told.top_flap_hz:.1f} Hz")
    if told.coast_down_s is not None:
        lines.append(
            f"from there the crank coasts for about {told.coast_down_s:.1f} s: off does not mean stopped"
        )
    if told.hottest_deg_c is not None:
        lines.append(f"winding at most about {told.hottest_deg_c:.0f} degC")
    lines.extend(f"LIMIT: {crossing}" for crossing in told.crossings)
    if not told.crossings:
        lines.append("no limit would be crossed")
    return lines


def _cell(value: float | None, width: int, digits: int) -> str:
    return f"{'-':>{width}}" if value is None else f"{value:{width}.{digits}f}"


__all__ = ["Forecast", "LevelForecast", "forecast", "forecast_lines"]
