"""The boundary and the slow mode of the complete mechanism, motor in the loop, without averaging."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from analysis.averaged import averaged_fold, equilibrium, lift_torque_n_m, shake_amplitude_m
from analysis.floquet.orbit import Orbit, at_angle, at_drive, first_guess, slow_mode
from analysis.floquet.turn import Turn
from analysis.mechanism.parameters import Carriage, Mechanism
from analysis.mechanism.steady import drive_for_flap_v, steady_flap_hz

#: Steps along the branch at most, and the longest of them.
WALK = 80
FARTHEST_STRIDE_RAD = 0.05


@dataclass(frozen=True)
class FloquetBoundary:
    """Where the held orbit ends: flap rate Hz, drive V, kind "fold", "pitchfork" or "flutter".

    angle_rad: body angle there with the crank at -90 deg, rad. For a prescribed crank rate the drive is NaN.
    """

    flap_hz: float
    drive_v: float
    kind: str
    angle_rad: float


@dataclass(frozen=True)
class FloquetMode:
    """Slow mode of a held orbit with its flap rate, mean angle (rad) and shake amplitude (m)."""

    flap_hz: float
    drive_v: float
    mean_angle_rad: float
    mode_hz: float
    decay_per_s: float
    stiffness_per_s2: float
    shake_amplitude_m: float


def boundary_by_floquet(mechanism: Mechanism, winding_deg_c: float = 25.0) -> FloquetBoundary | None:
    """Boundary of the complete model from above; None if nothing holds the body (clamped carriage) or
    nothing needs to (centre of mass below the pivot).

    With lift the orbit ends in a fold, found as the least drive along the branch that is followed in the section
    angle; without, at the drive where the slow stiffness is zero (pitchfork); and before either where its decay
    rate goes through zero (flutter).
    """
    averaged = averaged_fold(mechanism)
    if averaged is None or mechanism.cm_height_m <= 0.0:
        return None
    turn = Turn(mechanism, winding_deg_c, averaged.flap_hz)
    if lift_torque_n_m(mechanism, averaged.flap_hz) == 0.0:
        found = _pitchfork(mechanism, turn, averaged.flap_hz, winding_deg_c)
    else:
        found = _fold(mechanism, turn, averaged.flap_hz, winding_deg_c)
    if found is None:
        return None
    return _flutter(mechanism, turn, found, winding_deg_c) or found


def mode_at_voltage(mechanism: Mechanism, drive_v: float, winding_deg_c: float = 25.0) -> FloquetMode | None:
    """Slow mode of the held orbit at a drive; None below the boundary."""
    flap = steady_flap_hz(mechanism, drive_v, winding_deg_c)[0]
    if flap <= 0.0:
        return None
    turn = Turn(mechanism, winding_deg_c, flap)
    orbit = _held(mechanism, turn, drive_v, winding_deg_c)
    if orbit is None:
        return None
    mode = slow_mode(turn, orbit)
    if mode.stiffness_per_s2 <= 0.0:
        return None
    mean, height, _ = turn.mean_state(orbit.state, drive_v)
    shake = mechanism.shake_amplitude_m if mechanism.carriage is Carriage.GEARED else height
    return FloquetMode(
        orbit.flap_hz, drive_v, mean, mode.mode_hz, mode.decay_per_s, mode.stiffness_per_s2, shake
    )


def boundary_prescribed(mechanism: Mechanism) -> FloquetBoundary | None:
    """Boundary for a crank that turns at a constant rate whatever the load: the motor's constants do not matter."""
    found = boundary_by_floquet(stiff_crank(mechanism))
    return None if found is None else FloquetBoundary(found.flap_hz, math.nan, found.kind, found.angle_rad)


def mode_at_flap(mechanism: Mechanism, flap_hz: float) -> FloquetMode | None:
    """Slow mode for a crank that turns at a constant rate; None below the boundary."""
    stiff = stiff_crank(mechanism)
    found = mode_at_voltage(stiff, drive_for_flap_v(stiff, flap_hz)[0])
    return None if found is None else FloquetMode(**{**vars(found), "drive_v": math.nan})


def stiff_crank(mechanism: Mechanism) -> Mechanism:
    """The same mechanism on a motor without resistance to speak of: back-EMF fixes the crank rate."""
    return mechanism.with_(
        motor_resistance_ohm=1e-5,
        motor_inductance_h=0.0,
        motor_constant_n_m_per_a=0.05,
        gear_ratio=1.0,
        flywheel_inertia_kg_m2=1e3,
        motor_viscous_n_m_s=0.0,
        motor_coulomb_n_m=0.0,
    )


def _guess(
    mechanism: Mechanism, turn: Turn, flap_hz: float, winding_deg_c: float
) -> tuple[np.ndarray, float]:
    rest = equilibrium(mechanism, flap_hz)
    volts, amps = drive_for_flap_v(mechanism, flap_hz, winding_deg_c)
    height = shake_amplitude_m(mechanism, flap_hz) if mechanism.carriage is Carriage.FLOATING else 0.0
    angle = rest.angle_rad if rest is not None else math.atan2(mechanism.cm_forward_m, mechanism.cm_height_m)
    return first_guess(turn, angle, flap_hz, height, amps), volts


def _held(mechanism: Mechanism, turn: Turn, drive_v: float, winding_deg_c: float) -> Orbit | None:
    """The held orbit at a drive, from the averaged guess, else by stepping down from a higher drive."""
    averaged = averaged_fold(mechanism)
    if averaged is None:
        return None
    for above in (1.0, 1.02, 1.05, 1.1, 1.2):
        flap = steady_flap_hz(mechanism, above * drive_v, winding_deg_c)[0]
        if flap < 0.8 * averaged.flap_hz:
            continue
        guess, _ = _guess(mechanism, turn, flap, winding_deg_c)
        orbit = at_drive(turn, guess, above * drive_v)
        for share in (0.75, 0.5, 0.25, 0.0):
            if orbit is None or above == 1.0:
                break
            orbit = at_drive(turn, orbit.state, drive_v * (1.0 + share * (above - 1.0)))
        # Newton may land on the inverted or the lying orbit: the held one is stiff.
        if orbit is not None and slow_mode(turn, orbit).stiffness_per_s2 > 0.0:
            return orbit
    return None


def _fold(mechanism: Mechanism, turn: Turn, flap_hz: float, winding_deg_c: float) -> FloquetBoundary | None:
    """Least drive along the branch: walk in the section angle until the drive rises, then find its zero slope."""
    from scipy.optimize import brentq

    last = None
    for share in (1.08, 1.15, 1.3):
        guess, volts = _guess(mechanism, turn, share * flap_hz, winding_deg_c)
        last = at_drive(turn, guess, volts)
        if last is not None and slow_mode(turn, last).stiffness_per_s2 > 0.0:
            break
    if last is None:
        return None
    step = 0.1 * (float(last.state[0]) - math.atan2(mechanism.cm_forward_m, mechanism.cm_height_m))
    sense = math.copysign(1.0, step)
    for _ in range(WALK):
        following = at_angle(turn, last.state, last.drive_v, float(last.state[0]) + step)
        if following is None:
            step *= 0.5
        elif sense * following.drive_slope > 0.0:
            break
        else:
            # A body that is hardly biased starts within a hair of upright: stride out.
            last, step = following, sense * min(abs(1.3 * step), FARTHEST_STRIDE_RAD)
    else:
        return None
    near = last

    def slope(angle_rad: float) -> float:
        nonlocal near
        found = at_angle(turn, near.state, near.drive_v, angle_rad)
        if found is None:
            return math.nan
        near = found
        return found.drive_slope

    ends = float(last.state[0]), float(following.state[0])
    if not slope(ends[0]) * slope(ends[1]) < 0.0:
        return None
    found = at_angle(turn, near.state, near.drive_v, float(brentq(slope, *ends, xtol=1e-7)))
    if found is None:
        return None
    return FloquetBoundary(found.flap_hz, found.drive_v, "fold", float(found.state[0]))


def _pitchfork(
    mechanism: Mechanism, turn: Turn, flap_hz: float, winding_deg_c: float
) -> FloquetBoundary | None:
    """Drive at which the stiffness of the upright orbit is zero."""
    from scipy.optimize import brentq

    def stiffness(volts: float) -> float:
        flap = steady_flap_hz(mechanism, volts, winding_deg_c)[0]
        guess, _ = _guess(mechanism, turn, flap, winding_deg_c)
        guess[0] = math.atan2(mechanism.cm_forward_m, mechanism.cm_height_m)
        orbit = at_drive(turn, guess, volts)
        return math.nan if orbit is None else slow_mode(turn, orbit).stiffness_per_s2

    low, high = (drive_for_flap_v(mechanism, share * flap_hz, winding_deg_c)[0] for share in (0.9, 1.15))
    ends = stiffness(low), stiffness(high)
    if not (ends[0] < 0.0 < ends[1]):
        return None
    volts = float(brentq(stiffness, low, high, xtol=1e-7))
    orbit_guess, _ = _guess(
        mechanism, turn, steady_flap_hz(mechanism, volts, winding_deg_c)[0], winding_deg_c
    )
    orbit_guess[0] = math.atan2(mechanism.cm_forward_m, mechanism.cm_height_m)
    orbit = at_drive(turn, orbit_guess, volts)
    if orbit is None:
        return None
    return FloquetBoundary(orbit.flap_hz, volts, "pitchfork", float(orbit.state[0]))


def _flutter(
    mechanism: Mechanism, turn: Turn, found: FloquetBoundary, winding_deg_c: float
) -> FloquetBoundary | None:
    """The drive above the boundary at which the decay rate is zero, if it is negative just above it."""
    from scipy.optimize import brentq

    def decay(volts: float) -> float:
        orbit = _held(mechanism, turn, volts, winding_deg_c)
        return math.nan if orbit is None else slow_mode(turn, orbit).decay_per_s

    low = 1.02 * found.drive_v
    if not decay(low) < 0.0:
        return None
    high = low
    for _ in range(20):
        high *= 1.08
        if decay(high) > 0.0:
            volts = float(brentq(decay, high / 1.08, high, xtol=1e-6))
            orbit = _held(mechanism, turn, volts, winding_deg_c)
            if orbit is None:
                return None
            return FloquetBoundary(orbit.flap_hz, volts, "flutter", float(orbit.state[0]))
    return FloquetBoundary(math.nan, math.nan, "flutter", found.angle_rad)
