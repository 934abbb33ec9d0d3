"""An invented session: a body with a made-up stiffness law, tapped on levels of constant drive.

Nothing here comes from a mechanism; it only has the shape of a session, so that the report can be made
and looked at. Flap rate 3.6 Hz per volt, stiffness 0.35 (f^2 - 25.2^2), held above 26 Hz falling and 28.5 Hz
rising.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from types import SimpleNamespace

import numpy as np

from analysis.mechanism.parameters import Carriage, Mechanism
from rig.description import DEFAULT_HALTS, ChannelDescription, Limits, RigDescription, StopDescription
from rig.events import Event
from rig.report import MapCurve, Provenance
from rig.results import Boundary, Finding, LevelResult, Measured, SessionResult, TapResult, Theory
from rig.steps import Protocol

TICK_HZ = 1_000_000
FIRST_TICK = 5_000_000
DEG = math.pi / 180.0
SETTLE_S, QUIET_S, TAP_S = 4.0, 3.0, 6.0
NORMAL = Measured.normal


class Stream(dict[str, np.ndarray]):
    """Channels by name, with the two columns every stream has."""

    def __init__(self, time_s: np.ndarray, tick: np.ndarray, channels: dict[str, np.ndarray]) -> None:
        super().__init__(channels)
        self.time_s, self.tick = time_s, tick


@dataclass
class Invented:
    rig: RigDescription
    protocol: Protocol
    result: SessionResult
    streams: Stream
    events: list[Event]
    provenance: Provenance
    theory: MapCurve

    def arguments(self) -> dict[str, object]:
        """What write_report takes beside the path."""
        names = ("rig", "protocol", "result", "streams", "events", "provenance", "theory")
        return {name: getattr(self, name) for name in names}


def rig(title: str = "Invented boom, carriage on springs") -> RigDescription:
    channels = (
        ChannelDescription(
            "body", "body angle", "rad", 2 * math.pi / 8192, counts_per_turn=8192, index_pulse=True
        ),
        ChannelDescription(
            "crank", "crank angle", "rad", 2 * math.pi / 2048, counts_per_turn=2048, index_pulse=True
        ),
        ChannelDescription(
            "load", "vertical load", "N", 0.004, low_raw=-32768, high_raw=32767, delay_s=1.2e-4
        ),
        ChannelDescription(
            "current", "motor current", "A", 0.0005, low_raw=-32768, high_raw=32767, delay_s=1e-4
        ),
        ChannelDescription(
            "voltage", "motor voltage", "V", 0.001, low_raw=-32768, high_raw=32767, delay_s=1e-4
        ),
    )
    limits = Limits(6.0, 12.5, 110.0, -6 * DEG, 33 * DEG, 48.0, 0.5, load_n=120.0)
    mechanism = Mechanism(
        Carriage.FLOATING,
        0.072,
        0.03,
        0.0007,
        1.54e-4,
        0.13,
        2.5e-4,
        1.3,
        2.5e-4,
        0.0066,
        6.0,
        1.2e-4,
        -4 * DEG,
        30 * DEG,
        shuttle_mass_kg=0.1,
        shuttle_throw_m=0.024,
    )
    return RigDescription(
        "invented-boom",
        title,
        "simulated",
        1000.0,
        20,
        TICK_HZ,
        channels,
        limits,
        DEFAULT_HALTS,
        None,
        StopDescription(-4 * DEG, 30 * DEG),
        mechanism,
        constant_std={"cm_height_m": 3e-4, "body_inertia_kg_m2": 1.1e-6},
        unknown=("hinge_damping_n_m_s",),
        context={"operator": "bench 2", "air_temperature": "21.5 degC"},
        sha256="5e" * 32,
        text='name = "invented-boom"\ntitle = "Invented boom"\n',
    )


def invent(
    rising_v: tuple[float, ...] = (4.5, 5.5, 6.5, 7.5, 8.5, 9.5, 10.5, 11.5),
    falling_v: tuple[float, ...] = (11.0, 10.0, 9.5, 9.0, 8.5, 8.0, 7.75, 7.5, 7.25, 7.0, 6.75),
    taps: int = 3,
    seed: int = 7,
    title: str = "Invented boom, carriage on springs",
) -> Invented:
    """A whole session of the levels asked for, in that order."""
    random = np.random.default_rng(seed)
    level_s = SETTLE_S + QUIET_S + taps * TAP_S
    plan = [("rising", volts) for volts in rising_v] + [("falling", volts) for volts in falling_v]
    rows = round((len(plan) * level_s + 8.0) * 1000)
    time = np.arange(rows) / 1000.0
    drive, mean = np.zeros(rows), np.full(rows, -4.0 * DEG)
    swing = np.zeros(rows)
    events = [Event(FIRST_TICK, "run", {"rig": "invented-boom", "protocol": "stairs", "pace": "fast"})]
    levels: list[LevelResult] = []
    tapped: list[TapResult] = []
    last_v = 0.0
    for number, (direction, volts) in enumerate(plan):
        start = 2.0 + number * level_s
        flap = 3.6 * volts
        held = flap > (26.0 if direction == "falling" else 28.5)
        kappa = 0.35 * (flap**2 - 25.2**2)
        sigma = 0.75 + 0.005 * flap
        angle = (4.0 + 160.0 / (flap - 18.0)) * DEG if held else -4.0 * DEG
        inside = slice(round(start * 1000), round((start + level_s) * 1000))
        ramp = np.minimum((time[inside] - start) / 2.0, 1.0)
        drive[inside] = last_v + (volts - last_v) * ramp
        mean[inside] = angle
        last_v = volts
        events.append(_event(start, "level", level=number, direction=direction, drive_v=volts, role="level"))
        returned = 0
        for tap in range(taps):
            at = start + SETTLE_S + QUIET_S + tap * TAP_S
            kick = (0.35 + 0.35 * tap) * (1 if tap % 2 == 0 else -1)
            impulse = kick * 1.54e-4
            name = len(tapped) + 1
            events.append(_event(at, "tap", tap=name, level=number, impulse_n_m_s=impulse, by="tapper"))
            good = held and not (tap == 2 and flap < 27.5)
            window = slice(round((at + 0.04) * 1000), round((at + TAP_S - 0.2) * 1000))
            if held:
                omega = math.sqrt(max(kappa - sigma**2, 0.5))
                after = slice(round(at * 1000), round((at + TAP_S) * 1000))
                late = time[after] - at
                swing[after] += kick / omega * np.exp(-sigma * late) * np.sin(omega * late)
            returned += good
            doubled = name % 17 == 0
            tapped.append(
                TapResult(
                    name,
                    number,
                    _tick(at),
                    impulse,
                    kick * random.normal(1.0, 0.05),
                    good,
                    good and not doubled,
                    _tap_reason(good, held, doubled),
                    *((time[window.start], time[window.stop]) if good else (None, None)),
                    *(
                        (
                            NORMAL(sigma + random.normal(0, 0.02), 0.021),
                            NORMAL(math.sqrt(kappa - sigma**2) / 6.2832, 0.004),
                            NORMAL(kappa, 2.2),
                        )
                        if good
                        else (Measured(), Measured(), Measured())
                    ),
                    abs(kick) / math.sqrt(max(kappa, 1.0)) / DEG if good else None,
                    "ok" if good else "contact",
                )
            )
        levels.append(
            _level(direction, volts, flap, held, angle, kappa, sigma, taps, returned, start, random)
        )
        events.append(_event(start + level_s, "level_end", level=number))
    end = 2.0 + len(plan) * level_s
    events += [
        _event(end, "halt", how="ramp", cause=""),
        _event(end + 0.5, "turning"),
        _event(end + 5.9, "standstill", coast_s=5.4),
        _event(end + 6.0, "finished", exit_code=0, reason="done"),
    ]
    crank = 2.0 * np.pi * np.cumsum(3.6 * drive) / 1000.0
    body = np.clip(mean + swing + 0.5 * DEG * np.sin(crank) * (drive > 3), -4.1 * DEG, 30.1 * DEG)
    body = np.round((body + random.normal(0.0, 0.03 * DEG, rows)) / (2 * np.pi / 8192)) * (2 * np.pi / 8192)
    channels = {
        "body": body,
        "crank": crank,
        "load": 5.0 + 20.0 * np.sin(crank),
        "current": 0.12 * drive,
        "voltage": drive + random.normal(0.0, 0.003, rows),
    }
    ticks = FIRST_TICK + (time * TICK_HZ).astype(np.uint64)
    located = SimpleNamespace(falling=bool(falling_v), rising=bool(rising_v))
    result = SessionResult(
        tuple(levels),
        tuple(tapped),
        Boundary(
            "divergence",
            Measured(25.876, 0.024, 25.829, 25.923),
            Measured(7.188, 0.011, 7.166, 7.21),
            "joint fit of 9 levels",
        )
        if located.falling
        else Boundary("not_located", reason="no falling level"),
        Boundary(
            "capture",
            Measured(28.6, 0.9, 27.0, 30.6),
            Measured(7.94, 0.25, 7.5, 8.5),
            "not captured at 7.5 V, captured at 8.5 V",
        )
        if located.rising
        else Boundary("not_located", reason="no rising level"),
        Finding(
            "not_testable",
            "slope agrees with theory, but without the clamped control at the same flap rates "
            "vibrational and aerodynamic stiffness cannot be told apart",
            {"slope": NORMAL(0.3504, 0.0021), "theory_slope": NORMAL(0.3481, 0.0043)},
        ),
        Finding(
            "supported",
            "the drive register took no write in 57 locked intervals",
            {"smallest_gain_seen": NORMAL(0.0831, 0.002)},
        ),
        Finding("supported", "exponential envelopes; taps of three sizes agree"),
        Theory(26.01, 25.862, 23.08, 7.234),
        remarks=("a tap of 2e-4 N m s is lost about 4 % above the boundary",),
        excluded=({"level": 0, "reason": "drive not constant within 2 mV"},),
    )
    flap = np.linspace(25.9, 44.0, 60)
    theory = MapCurve(
        "theory (averaged potential)", flap, 0.348 * (flap**2 - 25.2**2), None, 4.2 + 158.0 / (flap - 18.0)
    )
    provenance = Provenance(
        "stairs.h5",
        "ab" * 32,
        "2026-03-04T09:12:44Z",
        "2026-03-04T09:21:30Z",
        "bench 2",
        "fast",
        "in-process simulation",
        {"haltere": "0.1.0", "numpy": np.__version__},
    )
    protocol = Protocol(
        "stairs", "Stairs rising and falling, three taps a level", (), sha256="c0" * 32, text="[[step]]\n"
    )
    return Invented(rig(title), protocol, result, Stream(time, ticks, channels), events, provenance, theory)


def _level(
    direction: str,
    volts: float,
    flap: float,
    held: bool,
    angle: float,
    kappa: float,
    sigma: float,
    taps: int,
    returned: int,
    start: float,
    random: np.random.Generator,
) -> LevelResult:
    none = Measured()
    firm = returned == taps
    return LevelResult(
        direction,
        NORMAL(volts, 0.0011),
        NORMAL(flap + random.normal(0, 0.01), 0.012),
        NORMAL(angle / DEG, 0.031),
        NORMAL(0.021, 0.0034) if held else none,
        NORMAL(math.sqrt(kappa - sigma**2) / 6.2832, 0.0031) if held else none,
        NORMAL(sigma + random.normal(0, 0.02), 0.022) if held else none,
        NORMAL(kappa + random.normal(0, 1.5), 1.9) if held else none,
        taps,
        returned,
        ("stable" if firm else "undetermined") if held else "unstable",
        "held" if held else "at_stop" if flap < 20 or direction == "falling" else "bouncing",
        "every tap returned and the decay rate is positive"
        if held and firm
        else f"{taps - returned} of {taps} taps were lost"
        if held
        else "the body lies on the lower end stop",
        NORMAL(0.00797, 1.2e-5) if held else none,
        31.0 + 0.2 * start / 30,
        0,
        start,
    )


def _tap_reason(good: bool, held: bool, doubled: bool) -> str:
    if doubled:
        return "double hit: two steps of angular rate 38 ms apart"
    if good:
        return ""
    return "the body reached the lower end stop" if held else "the body was not held before the tap"


def _tick(time_s: float) -> int:
    return FIRST_TICK + round(time_s * TICK_HZ)


def _event(time_s: float, kind: str, **data: object) -> Event:
    return Event(_tick(time_s), kind, data)
