"""Level table and tap table as rows of ready text."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rig.events import Event
from rig.report.rounding import NOT_KNOWN, bare, fixed, half_width_text, value_text
from rig.report.timing import BoardClock
from rig.report.wording import DIRECTION_SIGNS, REGIME_SIGNS, opening, seconds, sentence, words
from rig.results import LevelResult, Measured, SessionResult, TapResult

RAD_TO_DEG = 180.0 / np.pi
EMPTY = "–"
#: A column has room for so many; a flap rate known to a microhertz gains nothing by more.
MOST_DECIMALS = 4


@dataclass(frozen=True)
class Cell:
    """A number and its 95 % interval."""

    value: str
    interval: str = ""


@dataclass(frozen=True)
class LevelRow:
    direction: str
    sign: str
    role: str
    cells: tuple[Cell, ...]
    returned: str
    regime: str
    regime_sign: str
    state: str
    reason: str


LEVEL_HEADINGS = (
    ("drive", "V"),
    ("flap rate", "Hz"),
    ("mean angle", "deg"),
    ("load", "N"),
    ("slow mode", "Hz"),
    ("decay rate σ", "1/s"),
    ("stiffness κ", "1/s²"),
    ("shake", "mm"),
    ("winding", "°C"),
    ("locked writes", ""),
)


def level_rows(levels: Sequence[LevelResult]) -> list[LevelRow]:
    rows = []
    for level in levels:
        measured = (
            level.drive_v,
            level.flap_hz,
            level.mean_angle_deg,
            level.load_n,
            level.mode_hz,
            level.decay_per_s,
            level.stiffness_per_s2,
            _scaled(level.shake_amplitude_m, 1e3),
        )
        rows.append(
            LevelRow(
                direction=level.direction,
                sign=DIRECTION_SIGNS.get(level.direction, ""),
                role="" if level.role == "level" else level.role,
                cells=(
                    *(cell(number) for number in measured),
                    Cell(NOT_KNOWN if level.winding_deg_c is None else fixed(level.winding_deg_c, 1)),
                    Cell(NOT_KNOWN if level.writes is None else str(level.writes)),
                ),
                returned=f"{level.returned} of {level.taps}",
                regime=words(level.regime),
                regime_sign=REGIME_SIGNS.get(level.regime, ""),
                state=words(level.state),
                reason=sentence(level.reason),
            )
        )
    return rows


def cell(number: Measured) -> Cell:
    return Cell(value_text(number, MOST_DECIMALS), half_width_text(number, MOST_DECIMALS))


def _scaled(number: Measured, factor: float) -> Measured:
    scaled = [
        None if part is None else factor * part
        for part in (number.value, number.std, number.low, number.high)
    ]
    return Measured(*scaled)


@dataclass(frozen=True)
class TapRow:
    number: int
    level: str
    time: str
    impulse: str
    kick: str
    push: str
    outcome: str
    outcome_sign: str
    used: str
    accepted: bool
    fitted: bool
    interval: str
    decay: Cell
    mode: Cell
    amplitude: str
    reason: str


def tap_rows(
    result: SessionResult, clock: BoardClock, levels: Mapping[int, tuple[float, str]]
) -> list[TapRow]:
    """One row a tap; `levels` gives drive (V) and direction of each visited level."""
    return [_tap_row(tap, clock, levels) for tap in result.taps]


def _tap_row(tap: TapResult, clock: BoardClock, levels: Mapping[int, tuple[float, str]]) -> TapRow:
    known = levels.get(tap.level)
    push = tap.kick_rad_per_s if tap.kick_rad_per_s is not None else tap.impulse_n_m_s
    window = EMPTY
    if tap.start_s is not None and tap.end_s is not None:
        window = f"{seconds(tap.start_s)} to {seconds(tap.end_s)}"
    return TapRow(
        number=tap.tap,
        level=f"{DIRECTION_SIGNS.get(known[1], '')} {bare(known[0], 4)} V" if known else f"level {tap.level}",
        time=seconds(clock.seconds(tap.tick)),
        impulse=EMPTY if tap.impulse_n_m_s is None else fixed(1e3 * tap.impulse_n_m_s, 3),
        kick=EMPTY if tap.kick_rad_per_s is None else fixed(RAD_TO_DEG * tap.kick_rad_per_s, 1),
        push=EMPTY if not push else "up" if push > 0.0 else "down",
        outcome="returned" if tap.returned else "no return",
        outcome_sign="●" if tap.returned else "✕",
        used="used" if tap.accepted else "left out",
        accepted=tap.accepted,
        fitted=tap.decay_per_s.value is not None,
        interval=window,
        decay=cell(tap.decay_per_s) if tap.decay_per_s.value is not None else Cell(EMPTY),
        mode=cell(tap.mode_hz) if tap.mode_hz.value is not None else Cell(EMPTY),
        amplitude=EMPTY if tap.amplitude_deg is None else fixed(tap.amplitude_deg, 2),
        reason=sentence(tap.reason),
    )


def visited_levels(events: Sequence[Event]) -> dict[int, tuple[float, str]]:
    """Drive (V) and direction of each visited level, from the events."""
    return {
        int(event.data["level"]): (float(event.data["drive_v"]), str(event.data.get("direction", "")))
        for event in events
        if event.kind == "level"
    }


def excluded_lines(result: SessionResult) -> list[str]:
    """Everything left out of the answer and why: taps of one reason together, then whatever else."""
    reasons: dict[str, list[int]] = {}
    for tap in result.taps:
        if not tap.accepted:
            reasons.setdefault(sentence(tap.reason) or f"Reason {NOT_KNOWN}.", []).append(tap.tap)
    lines = [
        f"{'Tap' if len(taps) == 1 else 'Taps'} {runs(taps)}: {reason}" for reason, taps in reasons.items()
    ]
    told = {tap for taps in reasons.values() for tap in taps}
    for entry in result.excluded:
        if entry.get("tap") in told:
            continue
        rest = [f"{words(key)} {value}" for key, value in entry.items() if key != "reason"]
        what = ", ".join(rest) or "left out"
        lines.append(f"{opening(what)}: {sentence(str(entry.get('reason') or 'reason ' + NOT_KNOWN))}")
    return lines


def runs(numbers: Sequence[int]) -> str:
    """Whole numbers in order, with runs of three or more as "4 to 9"."""
    parts: list[list[int]] = []
    for number in sorted(numbers):
        if parts and number == parts[-1][-1] + 1:
            parts[-1].append(number)
        else:
            parts.append([number])
    told = [f"{part[0]} to {part[-1]}" if len(part) > 2 else ", ".join(map(str, part)) for part in parts]
    return ", ".join(told)
