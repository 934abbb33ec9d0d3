"""What the interlocks watched, how near the run came to each limit, what tripped and what was lost."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rig.description import RigDescription
from rig.events import Event
from rig.report.rounding import NOT_KNOWN, bare
from rig.report.timing import BoardClock
from rig.report.trace import Streams, channel, flap_course
from rig.report.wording import HALT_WORDS, seconds, sentence, words
from rig.results import SessionResult

RAD_TO_DEG = 180.0 / np.pi


@dataclass(frozen=True)
class LimitLine:
    name: str
    limit: str
    reached: str
    halt: str


@dataclass(frozen=True)
class EventLine:
    time: str
    what: str


def limit_lines(rig: RigDescription, result: SessionResult, streams: Streams) -> list[LimitLine]:
    """Each limit with the most extreme value seen and the halt its trip would have caused."""
    limits = rig.limits
    lines = []
    for name, cause, limit, unit, reached in (
        ("motor current", "current", limits.current_a, "A", _largest(channel(streams, rig, "motor current"))),
        ("motor voltage", "voltage", limits.voltage_v, "V", _largest(channel(streams, rig, "motor voltage"))),
        ("winding (model)", "winding", limits.winding_deg_c, "°C", _winding(result)),
        ("flap rate", "flap_rate", limits.flap_hz, "Hz", _fastest(rig, streams)),
        ("load", "load", limits.load_n, "N", _largest(channel(streams, rig, "vertical load"))),
    ):
        if limit is not None:
            lines.append(
                LimitLine(name, f"{bare(limit)} {unit}", _with_unit(reached, unit), _halt(rig, cause))
            )
    angle = channel(streams, rig, "body angle")
    reach = NOT_KNOWN
    if angle is not None and len(angle):
        reach = (
            f"{bare(RAD_TO_DEG * float(angle.min()), 3)} to {bare(RAD_TO_DEG * float(angle.max()), 3)} deg"
        )
    travel = (
        f"{bare(RAD_TO_DEG * limits.travel_low_rad, 3)} to {bare(RAD_TO_DEG * limits.travel_high_rad, 3)} deg"
    )
    lines.insert(3, LimitLine("body travel", travel, reach, _halt(rig, "travel")))
    return lines


def _halt(rig: RigDescription, cause: str) -> str:
    halt = rig.halts.get(cause)
    return NOT_KNOWN if halt is None else HALT_WORDS.get(halt.value, halt.value)


def _with_unit(number: float | None, unit: str) -> str:
    return NOT_KNOWN if number is None else f"{bare(number, 3)} {unit}"


def _largest(values: np.ndarray | None) -> float | None:
    return None if values is None or len(values) == 0 else float(np.abs(values).max())


def _winding(result: SessionResult) -> float | None:
    known = [level.winding_deg_c for level in result.levels if level.winding_deg_c is not None]
    return max(known) if known else None


def _fastest(rig: RigDescription, streams: Streams) -> float | None:
    crank = channel(streams, rig, "crank angle")
    time = np.asarray(streams.time_s, dtype=np.float64)
    if crank is None or len(time) < 2:
        return None
    # Over a quarter of a second: several turns, so that speed ripple within a turn does not count.
    bins = max(1, int((time[-1] - time[0]) / 0.25))
    return float(np.max(np.abs(flap_course(time, crank, bins)[1])))


def trip_lines(events: Sequence[Event], clock: BoardClock) -> list[EventLine]:
    """Trips, halts and the way to standstill, in order."""
    lines = []
    for event in events:
        data = event.data
        if event.kind == "trip":
            told = str(data.get("sentence") or f"{words(str(data.get('cause', 'trip')))} tripped")
        elif event.kind == "halt":
            cause = words(str(data.get("cause", "")))
            how = HALT_WORDS.get(str(data.get("how", "")), str(data.get("how", "")))
            told = f"halt: {how}" + (f", cause: {cause}" if cause else "")
        elif event.kind == "turning":
            told = "drive off, the crank still turns"
        elif event.kind == "standstill":
            coast = data.get("coast_s")
            told = "standstill" + (f" after coasting {bare(float(coast), 3)} s" if coast is not None else "")
        else:
            continue
        lines.append(EventLine(seconds(clock.seconds(event.tick)), sentence(told)))
    return lines


def note_lines(events: Sequence[Event], clock: BoardClock) -> list[EventLine]:
    """Marks, prompts and board notices, in order; a prompt that was answered tells how soon."""
    lines = []
    for event in events:
        text = event.data.get("text")
        if event.kind in ("mark", "notice", "prompt", "acknowledged") and text:
            lines.append(EventLine(seconds(clock.seconds(event.tick)), f"{words(event.kind)}: {text}"))
    return lines


def loss_sentence(result: SessionResult, events: Sequence[Event]) -> str:
    overruns = sum(int(event.data.get("overruns", 0) or 0) for event in events if event.kind == "loss")
    if not (result.lost_rows or result.lost_frames or overruns):
        return "No row and no frame was lost."
    return f"Lost: {result.lost_rows} rows, {result.lost_frames} frames; overruns on the board: {overruns}."


def zero_sentence(events: Sequence[Event]) -> str:
    """Encoder zero before and after the run: a slipped zero shows as a shift."""
    zeros = [
        float(event.data["body_rad"])
        for event in events
        if event.kind == "zero" and event.data.get("body_rad") is not None
    ]
    if not zeros:
        return "The encoder zero was not taken in this session."
    if len(zeros) == 1:
        rest = bare(RAD_TO_DEG * zeros[0], 3)
        return f"Rest angle with the drive off: {rest} deg, taken once: a slipped zero would not show."
    shift = RAD_TO_DEG * (zeros[-1] - zeros[0])
    return f"Rest angle with the drive off, first against last time: shifted by {bare(shift, 2)} deg."
