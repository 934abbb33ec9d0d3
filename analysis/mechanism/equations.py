"""Equations of motion of one flapping mechanism on its bench, and the kernels that integrate them.

One family of kernels in one file, because compiled code on disk is renewed only when its own file
changes. Lagrange equations in body angle theta, carriage height y and crank angle psi; M, A, B, P as in

    theta:  I th'' + m Q y''             = -m g P + lift + stop - hinge + applied torque       (R1)
    psi:    A psi'' + B y''              = JJ sin psi cos psi Om^2 - g B + motor - drag        (R2)
    y:      W y'' + m Q th'' + B psi''   = -m Q' om^2 + ms s sin psi Om^2 - ky y - cy v + lift (R3)

with P the horizontal offset of the centre of mass, Q = P + e P' and W = M (1 + e^2) for a carriage whose
guide leans by e, A = J + JJ cos^2 psi, JJ = ms s^2 + Iw Phi^2, B = ms s cos psi. A yielding base adds its
acceleration to g. Wings: quasi-steady strip, coefficients of Dickinson, Lehmann and Sane (1999).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from analysis.kernel import kernel

Vector = NDArray[np.float64]

# State. CELL is what the load cell shows (N), BASE the height of a yielding base, SWEEP the wing angle
# when there is play between crank and wing.
THETA, OMEGA, HEIGHT, CLIMB, CRANK, RATE, CURRENT = range(7)
CELL, CELL_RATE, BASE, BASE_RATE, SWEEP, SWEEP_RATE = range(7, 13)
MOTION = 13
# Energies since the start, J, carried only when asked: in from the supply and from applied torques,
# out into copper, motor friction, air, hinge, carriage and base dampers, end stops.
SUPPLIED, APPLIED, COPPER, ROTOR, AIR, HINGE, DAMPERS, STOPS = range(13, 21)
# Slow and commanded quantities of a bench.
WINDING, HOUSING, DRIVE_V, TARGET_V, SLEW, MOTOR = range(21, 27)
TAP_AGE, TAP_IMPULSE, TAP_DURATION, HELD, HOLD_ANGLE, SLIDING, ROW = range(27, 34)
RECORD = 34

DRIVEN, COASTING, BRAKING = 0, 1, 2
FLOATING, GEARED = 0, 1

# Parameters, all floats.
(CARRIAGE, MASS, CM_UP, CM_FORWARD, INERTIA, MOVING, SHUTTLE, THROW, SPRING, DAMPER, SHAKE, PRELOAD) = range(
    12
)
(FLYWHEEL, STROKE, RADIUS, AREA, INCIDENCE, ARM, WING_INERTIA, AIR_DENSITY, FLIP) = range(12, 21)
(HINGE_DAMPING, STICKING, STOP_LOW, STOP_HIGH, STOP_STIFFNESS, STOP_DAMPING) = range(21, 27)
(OHM, HENRY, TORQUE_CONSTANT, GEAR, VISCOUS, COULOMB, COULOMB_RATE, COPPER_SLOPE) = range(27, 35)
(WINDING_HEAT, HOUSING_HEAT, WINDING_PATH, HOUSING_PATH, AMBIENT, GRAVITY) = range(35, 41)
(FLUTTER, FLUTTER_RATE, FLUTTER_TORQUE) = range(41, 44)
(NOISE, SEED, PLAY, PLAY_STIFFNESS, PLAY_DAMPING, BASE_MASS, BASE_SPRING, BASE_DAMPER) = range(44, 52)
(LEAN, BENDING, CELL_OMEGA, CELL_DAMPING, ENERGIES, ALWAYS_FINE) = range(52, 58)
PARAMETERS = 58

# Columns of a bench row.
(OUT_THETA, OUT_CRANK, OUT_CELL, OUT_CURRENT, OUT_VOLTAGE, OUT_HEIGHT, OUT_WINDING) = range(7)
(OUT_OMEGA, OUT_CONTACT, OUT_DRIVE, OUT_TAP) = range(7, 11)
ROW_COLUMNS = 11

LONGEST_STEP_S = 2.5e-4
#: The hand that holds the body brings it to its angle like a critically damped oscillator.
GRIP_PER_S = 60.0
#: Within this of an end stop the step is a third: the stops are stiff, and ask for 1e-4 s or less.
NEAR_STOP_RAD = 0.035


@kernel(error_model="numpy", fastmath={"contract", "arcp", "nsz", "reassoc"})
def _accelerations(  # type: ignore[no-untyped-def]
    carriage, inertia, coupling, weight, a_crank, b_crank, shake, sin_c, cos_c, rate, r1, r2, r3, grip, pull
):
    """th'', y'', psi'' from the right-hand sides; with `grip` th'' is given as `pull`."""
    if carriage == FLOATING:
        if grip:
            up = (r3 - coupling * pull - b_crank * r2 / a_crank) / (weight - b_crank * b_crank / a_crank)
            return pull, up, (r2 - b_crank * up) / a_crank
        up = (r3 - coupling * r1 / inertia - b_crank * r2 / a_crank) / (
            weight - coupling * coupling / inertia - b_crank * b_crank / a_crank
        )
        return (r1 - coupling * up) / inertia, up, (r2 - b_crank * up) / a_crank
    lever = shake * cos_c if carriage == GEARED else 0.0
    centripetal = -shake * sin_c * rate * rate if carriage == GEARED else 0.0
    total = a_crank + 2.0 * b_crank * lever + weight * lever * lever
    load = r2 + lever * r3 - centripetal * (b_crank + lever * weight)
    if grip:
        turn = (load - lever * coupling * pull) / total
        return pull, lever * turn + centripetal, turn
    turn = (load - lever * coupling * (r1 - coupling * centripetal) / inertia) / (
        total - lever * lever * coupling * coupling / inertia
    )
    up = lever * turn + centripetal
    return (r1 - coupling * up) / inertia, up, turn


@kernel(error_model="numpy", fastmath={"contract", "arcp", "nsz", "reassoc"})
def rates(x, p, n, mode, volts, ohm, torque, grip, angle, dx):  # type: ignore[no-untyped-def]
    """Time derivatives of the state into `dx[:n]`; returns (force on the base N, grip torque N m).

    `torque` acts on the body; with `grip` the body is led to `angle`, and the grip torque is what that
    takes. `n` is MOTION, or STOPS + 1 to carry energies.
    """
    theta, omega, rate, current = x[THETA], x[OMEGA], x[RATE], x[CURRENT]
    sin_t, cos_t = math.sin(theta), math.cos(theta)
    sin_c, cos_c = math.sin(x[CRANK]), math.cos(x[CRANK])
    carriage = int(p[CARRIAGE])
    if carriage == FLOATING:
        height, climb = x[HEIGHT], x[CLIMB]
    elif carriage == GEARED:
        height, climb = p[SHAKE] * sin_c, p[SHAKE] * cos_c * rate
    else:
        height, climb = 0.0, 0.0
    mass, inertia, moving, lean = p[MASS], p[INERTIA], p[MOVING], p[LEAN]
    offset = p[CM_FORWARD] * cos_t - p[CM_UP] * sin_t
    slope = -(p[CM_FORWARD] * sin_t + p[CM_UP] * cos_t)
    throw = p[SHUTTLE] * p[THROW]
    crank_inertia = p[SHUTTLE] * p[THROW] * p[THROW]

    # Wings.
    normal = tangent = across = 0.0
    sweep_lever = p[STROKE] * cos_c
    sweep_rate = sweep_lever * rate
    play = p[PLAY] > 0.0
    root = 0.0  # torque of the crank on a wing that has play
    if play:
        sweep_rate = x[SWEEP_RATE]
        gap = p[STROKE] * sin_c - x[SWEEP]
        half = 0.5 * p[PLAY]
        beyond = gap - half if gap > half else (gap + half if gap < -half else 0.0)
        if beyond != 0.0:
            root = p[PLAY_STIFFNESS] * beyond + p[PLAY_DAMPING] * (sweep_lever * rate - sweep_rate)
            root = max(root, 0.0) if beyond > 0.0 else min(root, 0.0)
    elif p[AREA] > 0.0:
        crank_inertia += p[WING_INERTIA] * p[STROKE] * p[STROKE]
    if p[AREA] > 0.0:
        along = p[RADIUS] * sweep_rate
        across = p[ARM] * omega + (climb + x[BASE_RATE]) * cos_t - lean * climb * sin_t
        speed2 = along * along + across * across
        speed = math.sqrt(speed2)
        if speed > 1e-12:
            attack = p[INCIDENCE] - math.atan2(across, abs(along))
            lift = 0.225 + 1.58 * math.sin(2.13 * attack - 0.12566370614359174)
            drag = 1.92 - 1.55 * math.cos(2.04 * attack - 0.17139133254584317)
            pressure = 0.5 * p[AIR_DENSITY] * p[AREA] * speed
            normal = pressure * (lift * abs(along) - drag * across)
            if p[BENDING] > 0.0:
                beats = rate / 251.32741228718345
                normal *= max(0.0, 1.0 - p[BENDING] * beats * beats)
            tangent = pressure * (drag * abs(along) + lift * across) * along
            tangent /= math.sqrt(along * along + p[FLIP] * p[FLIP])
    air_torque = tangent * p[RADIUS]

    # Hinge, end stops.
    hinge = -p[HINGE_DAMPING] * omega
    if p[FLUTTER] > 0.0:
        falling = p[FLUTTER] * math.exp(-abs(rate) / p[FLUTTER_RATE])
        hinge += p[FLUTTER_TORQUE] * math.tanh(falling * omega / p[FLUTTER_TORQUE])
    stop = 0.0
    if theta > p[STOP_HIGH]:
        depth = theta - p[STOP_HIGH]
        stop = -p[STOP_STIFFNESS] * depth * max(0.0, 1.0 + p[STOP_DAMPING] * omega)
    elif theta < p[STOP_LOW]:
        depth = p[STOP_LOW] - theta
        stop = p[STOP_STIFFNESS] * depth * max(0.0, 1.0 - p[STOP_DAMPING] * omega)

    # Motor. With HENRY = 0 the current follows the voltage at once.
    gear = p[GEAR]
    motor_rate = gear * rate
    emf = p[TORQUE_CONSTANT] * motor_rate
    if mode == COASTING:
        current = 0.0
        dx[CURRENT] = 0.0
    else:
        applied = volts if mode == DRIVEN else 0.0
        if p[HENRY] > 0.0:
            dx[CURRENT] = (applied - ohm * current - emf) / p[HENRY]
        else:
            current = (applied - emf) / ohm
            dx[CURRENT] = 0.0
    steep = motor_rate / p[COULOMB_RATE]
    if steep > 19.0:
        rubbing = p[COULOMB]
    elif steep < -19.0:
        rubbing = -p[COULOMB]
    else:
        rubbing = p[COULOMB] * math.tanh(steep)
    rubbing += p[VISCOUS] * motor_rate

    coupling = mass * (offset + lean * slope)
    a_crank = p[FLYWHEEL] + crank_inertia * cos_c * cos_c
    b_crank = throw * cos_c
    weight = moving * (1.0 + lean * lean)
    square = rate * rate
    r1 = normal * p[ARM] + stop + hinge + torque
    r2 = crank_inertia * sin_c * cos_c * square + gear * (p[TORQUE_CONSTANT] * current - rubbing)
    r2 -= root * sweep_lever if play else air_torque * sweep_lever
    r3 = -mass * (slope - lean * offset) * omega * omega + throw * sin_c * square
    r3 += normal * (cos_t - lean * sin_t)
    if carriage == FLOATING:
        r3 -= p[SPRING] * height + p[DAMPER] * climb
    borne = p[GRAVITY] * p[PRELOAD]  # of the weight, by the set of the carriage spring
    shake = p[SHAKE]
    pull = 0.0
    if grip:
        pull = -2.0 * GRIP_PER_S * omega - GRIP_PER_S * GRIP_PER_S * (theta - angle)
    gravity = p[GRAVITY]
    inertial = mass * slope * omega * omega - throw * sin_c * square - normal * cos_t
    if p[BASE_MASS] > 0.0:
        # The force on the base is linear in its acceleration: two values give the line.
        force0 = force1 = 0.0
        for trial in range(2):
            g = gravity + trial
            t2, y2, c2 = _accelerations(
                carriage,
                inertia,
                coupling,
                weight,
                a_crank,
                b_crank,
                shake,
                sin_c,
                cos_c,
                rate,
                r1 - mass * g * offset,
                r2 - g * b_crank,
                r3 - moving * (g - borne),
                grip,
                pull,
            )
            force1 = moving * (y2 + g) + mass * offset * t2 + b_crank * c2 + inertial
            if trial == 0:
                force0 = force1
        away = -p[BASE_SPRING] * x[BASE] - p[BASE_DAMPER] * x[BASE_RATE] + moving * p[GRAVITY] - force0
        lift_off = away / (p[BASE_MASS] + force1 - force0)
        dx[BASE] = x[BASE_RATE]
        dx[BASE_RATE] = lift_off
        gravity += lift_off
    else:
        dx[BASE] = 0.0
        dx[BASE_RATE] = 0.0
    r1 -= mass * gravity * offset
    spin, up, turn = _accelerations(
        carriage,
        inertia,
        coupling,
        weight,
        a_crank,
        b_crank,
        shake,
        sin_c,
        cos_c,
        rate,
        r1,
        r2 - gravity * b_crank,
        r3 - moving * (gravity - borne),
        grip,
        pull,
    )
    force = moving * (up + gravity) + mass * offset * spin + b_crank * turn + inertial

    dx[THETA] = omega
    dx[OMEGA] = spin
    dx[HEIGHT] = climb if carriage == FLOATING else 0.0
    dx[CLIMB] = up if carriage == FLOATING else 0.0
    dx[CRANK] = rate
    dx[RATE] = turn
    ring = p[CELL_OMEGA]
    dx[CELL] = x[CELL_RATE]
    dx[CELL_RATE] = ring * (ring * (force - x[CELL]) - 2.0 * p[CELL_DAMPING] * x[CELL_RATE])
    if play:
        dx[SWEEP] = sweep_rate
        dx[SWEEP_RATE] = (root - air_torque) / p[WING_INERTIA]
    else:
        dx[SWEEP] = 0.0
        dx[SWEEP_RATE] = 0.0
    if n > MOTION:
        dx[SUPPLIED] = volts * current if mode == DRIVEN else 0.0
        dx[APPLIED] = torque * omega
        dx[COPPER] = ohm * current * current
        dx[ROTOR] = rubbing * motor_rate
        dx[AIR] = air_torque * sweep_rate - normal * across
        dx[HINGE] = -hinge * omega
        base_loss = p[BASE_DAMPER] * x[BASE_RATE] * x[BASE_RATE] if p[BASE_MASS] > 0.0 else 0.0
        dx[DAMPERS] = base_loss + (p[DAMPER] * climb * climb if carriage == FLOATING else 0.0)
        if play:
            elastic_root = p[PLAY_STIFFNESS] * beyond
            dx[DAMPERS] += (root - elastic_root) * (sweep_lever * rate - sweep_rate)
        elastic = 0.0
        if theta > p[STOP_HIGH]:
            elastic = -p[STOP_STIFFNESS] * (theta - p[STOP_HIGH])
        elif theta < p[STOP_LOW]:
            elastic = p[STOP_STIFFNESS] * (p[STOP_LOW] - theta)
        dx[STOPS] = (elastic - stop) * omega
    return force, inertia * spin + coupling * up - r1


@kernel(error_model="numpy", fastmath={"contract", "arcp", "nsz", "reassoc"})
def _step(x, p, n, h, mode, volts, ohm, t0, t1, t2, grip, angle, work):  # type: ignore[no-untyped-def]
    """One classical Runge-Kutta step of `h` seconds; t0, t1, t2 torque at its start, middle and end."""
    stage, slope, total = work[0], work[1], work[2]
    for j in range(MOTION):
        stage[j] = x[j]
    for k in range(4):
        torque = t0 if k == 0 else (t2 if k == 3 else t1)
        rates(stage, p, n, mode, volts, ohm, torque, grip, angle, slope)
        if k == 0:
            for j in range(n):
                total[j] = slope[j]
                stage[j] = x[j] + 0.5 * h * slope[j]
        elif k < 3:
            reach = h if k == 2 else 0.5 * h
            for j in range(n):
                total[j] += 2.0 * slope[j]
                stage[j] = x[j] + reach * slope[j]
    sixth = h / 6.0
    for j in range(n):
        x[j] += sixth * (total[j] + slope[j])


@kernel(error_model="numpy", fastmath={"contract", "arcp", "nsz", "reassoc"})
def turn_crank(x, p, volts, ohm, angle, steps):  # type: ignore[no-untyped-def]
    """Carry the state on by `angle` of the crank, which is the independent variable; returns the time it took.

    With the crank as clock every turn takes the same steps, so the map of a turn is smooth in state and drive.
    """
    h = angle / steps
    stage, slope, total = np.zeros(MOTION), np.zeros(MOTION), np.zeros(MOTION)
    time = 0.0
    for _ in range(steps):
        for j in range(MOTION):
            stage[j] = x[j]
            total[j] = 0.0
        passed = 0.0
        for k in range(4):
            rates(stage, p, MOTION, DRIVEN, volts, ohm, 0.0, False, 0.0, slope)
            per = 1.0 / stage[RATE]
            share = 1.0 if k == 0 or k == 3 else 2.0
            reach = h if k == 2 else 0.5 * h
            passed += share * per
            for j in range(MOTION):
                total[j] += share * per * slope[j]
                stage[j] = x[j] + reach * per * slope[j]
        for j in range(MOTION):
            x[j] += h / 6.0 * total[j]
        time += h / 6.0 * passed
    return time


@kernel(error_model="numpy")
def _tap_torque(impulse, duration, age):  # type: ignore[no-untyped-def]
    """Half-sine pulse of the given impulse."""
    if age < 0.0 or age >= duration:
        return 0.0
    return impulse * math.pi / (2.0 * duration) * math.sin(math.pi * age / duration)


@kernel(error_model="numpy")
def white(seed, slot):  # type: ignore[no-untyped-def]
    """A random number of mean 0 and variance 1 that depends on (seed, slot) only.

    Sum of four 16-bit uniforms of one scrambled counter (the finaliser of Stafford, variant 13, as in
    splitmix64); only its integral over many slots is ever seen, which is normal.
    """
    z = np.uint64(seed) * np.uint64(0xD1342543DE82EF95) + np.uint64(slot) * np.uint64(0x9E3779B97F4A7C15)
    z = (z ^ (z >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    z = (z ^ (z >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    z = z ^ (z >> np.uint64(31))
    total = 0.0
    for _ in range(4):
        total += float(z & np.uint64(0xFFFF))
        z = z >> np.uint64(16)
    return (total - 131070.0) * (1.7320508075688772 / 65536.0)


@kernel(error_model="numpy", fastmath={"contract", "arcp", "nsz", "reassoc"})
def _stick_slip(r, p, n, h, mode, volts, ohm, torque, t1, t2, work):  # type: ignore[no-untyped-def]
    """A step with Coulomb friction in the hinge that really sticks: events within the step are located.

    r[SLIDING] is the sense of sliding, 0 while stuck. Torques are taken as constant within the part
    steps around an event.
    """
    limit = p[STICKING]
    left = h
    sense = r[SLIDING]
    for _ in range(4):
        if sense == 0.0:
            _, needed = rates(r, p, n, mode, volts, ohm, torque, True, r[THETA], work[1])
            if abs(needed) <= limit:
                r[OMEGA] = 0.0
                _step(r, p, n, left, mode, volts, ohm, torque, t1, t2, True, r[THETA], work)
                r[OMEGA] = 0.0
                break
            sense = -1.0 if needed > 0.0 else 1.0
        for j in range(n):
            work[3, j] = r[j]
        rub = limit * sense
        _step(r, p, n, left, mode, volts, ohm, torque - rub, t1 - rub, t2 - rub, False, 0.0, work)
        if r[OMEGA] * sense >= 0.0:
            break
        before = work[3, OMEGA]
        part = left * abs(before) / (abs(before) + abs(r[OMEGA])) if before * sense > 0.0 else 0.0
        for j in range(n):
            r[j] = work[3, j]
        if part > 0.0:
            _step(r, p, n, part, mode, volts, ohm, torque - rub, torque - rub, torque - rub, False, 0.0, work)
        r[OMEGA] = 0.0
        left -= part
        sense = 0.0
        if left <= 1e-9:
            break
    r[SLIDING] = sense


@kernel(error_model="numpy", fastmath={"contract", "arcp", "nsz", "reassoc"})
def advance(r, p, row_s, out):  # type: ignore[no-untyped-def]
    """Advance the record `r` by len(out) rows of `row_s` seconds; out[k] is the state at the end of row k.

    The result does not depend on how rows are grouped into calls.
    """
    # Without base and play the states from BASE on stand still.
    n = MOTION if p[BASE_MASS] > 0.0 or p[PLAY] > 0.0 else BASE
    if p[ENERGIES] > 0.0:
        n = STOPS + 1
    work = np.zeros((4, STOPS + 1))
    slots = int(math.ceil(row_s / LONGEST_STEP_S - 1e-9))  # noqa: RUF046  numba's ceil is a float
    slot_s = row_s / slots
    noise = p[NOISE] / math.sqrt(slot_s)
    always_fine = p[ALWAYS_FINE] > 0.0 or p[STICKING] > 0.0 or p[PLAY] > 0.0
    for k in range(out.shape[0]):
        first = r[ROW] * slots
        touched = 0.0
        for s in range(slots):
            mode = int(r[MOTOR])
            drive, target, change = r[DRIVE_V], r[TARGET_V], r[SLEW] * slot_s
            r[DRIVE_V] = (
                target if abs(target - drive) <= change else drive + math.copysign(change, target - drive)
            )
            if mode == COASTING:
                r[CURRENT] = 0.0
            push = noise * white(p[SEED], first + s) if noise > 0.0 else 0.0
            gap = min(r[THETA] - p[STOP_LOW], p[STOP_HIGH] - r[THETA]) - abs(r[OMEGA]) * slot_s
            parts = 3 if always_fine or gap < NEAR_STOP_RAD else 1
            h = slot_s / parts
            ohm = p[OHM] * (1.0 + p[COPPER_SLOPE] * (r[WINDING] - 25.0))
            volts = 0.5 * (drive + r[DRIVE_V])
            for _ in range(parts):
                t0 = t1 = t2 = push
                if r[TAP_AGE] >= 0.0:
                    t0 += _tap_torque(r[TAP_IMPULSE], r[TAP_DURATION], r[TAP_AGE])
                    t1 += _tap_torque(r[TAP_IMPULSE], r[TAP_DURATION], r[TAP_AGE] + 0.5 * h)
                    t2 += _tap_torque(r[TAP_IMPULSE], r[TAP_DURATION], r[TAP_AGE] + h)
                    r[TAP_AGE] += h
                    if r[TAP_AGE] >= r[TAP_DURATION]:
                        r[TAP_AGE] = -1.0
                if r[HELD] > 0.0:
                    _step(r, p, n, h, mode, volts, ohm, t0, t1, t2, True, r[HOLD_ANGLE], work)
                elif p[STICKING] > 0.0:
                    _stick_slip(r, p, n, h, mode, volts, ohm, t0, t1, t2, work)
                else:
                    _step(r, p, n, h, mode, volts, ohm, t0, t1, t2, False, 0.0, work)
                if r[THETA] < p[STOP_LOW] or r[THETA] > p[STOP_HIGH]:
                    touched = 1.0
            if p[HENRY] <= 0.0 and mode != COASTING:
                supply = r[DRIVE_V] if mode == DRIVEN else 0.0
                r[CURRENT] = (supply - p[TORQUE_CONSTANT] * p[GEAR] * r[RATE]) / ohm
            # Heat moves so slowly that one Euler step a slot is exact enough.
            flow = (r[WINDING] - r[HOUSING]) / p[WINDING_PATH]
            r[WINDING] += slot_s * (ohm * r[CURRENT] * r[CURRENT] - flow) / p[WINDING_HEAT]
            r[HOUSING] += slot_s * (flow - (r[HOUSING] - p[AMBIENT]) / p[HOUSING_PATH]) / p[HOUSING_HEAT]
        r[ROW] += 1.0
        mode = int(r[MOTOR])
        ohm = p[OHM] * (1.0 + p[COPPER_SLOPE] * (r[WINDING] - 25.0))
        shown = r[CELL]
        if p[CELL_OMEGA] <= 0.0:  # an ideal cell shows the force itself
            grip = r[HELD] > 0.0 or (p[STICKING] > 0.0 and r[SLIDING] == 0.0)
            angle = r[HOLD_ANGLE] if r[HELD] > 0.0 else r[THETA]
            shown, _ = rates(r, p, n, mode, r[DRIVE_V], ohm, 0.0, grip, angle, work[1])
        if p[CARRIAGE] == GEARED:
            r[HEIGHT] = p[SHAKE] * math.sin(r[CRANK])
            r[CLIMB] = p[SHAKE] * math.cos(r[CRANK]) * r[RATE]
        emf = p[TORQUE_CONSTANT] * p[GEAR] * r[RATE]
        out[k, OUT_THETA] = r[THETA]
        out[k, OUT_CRANK] = r[CRANK]
        out[k, OUT_CELL] = shown
        out[k, OUT_CURRENT] = r[CURRENT]
        out[k, OUT_VOLTAGE] = r[DRIVE_V] if mode == DRIVEN else (emf if mode == COASTING else 0.0)
        out[k, OUT_HEIGHT] = r[HEIGHT]
        out[k, OUT_WINDING] = r[WINDING]
        out[k, OUT_OMEGA] = r[OMEGA]
        out[k, OUT_CONTACT] = touched
        out[k, OUT_DRIVE] = r[DRIVE_V]
        age = r[TAP_AGE]
        out[k, OUT_TAP] = _tap_torque(r[TAP_IMPULSE], r[TAP_DURATION], age) if age >= 0.0 else 0.0
