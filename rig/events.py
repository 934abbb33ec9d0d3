"""Events of a run: what happened at which board tick. They are journalled and sealed with the rows.

kind            data
--------------  -------------------------------------------------------------------------------
run             rig, protocol
armed           by
drive           target_v, slew_v_per_s
level           level, direction ("rising"|"falling"), drive_v, role ("level"|"reference"|"step")
settled         level, settled (bool), waited_s
quiet           level                      the undisturbed record begins (drive locked)
quiet_end       level, writes
tap             tap, level, impulse_n_m_s, by
tap_end         tap, level, writes         the observation ends; writes to the locked drive register
tap_excluded    tap, reason
tap_reason      tap, reason                why a tap was left out, told after it was: in place of what was written
observe         level                      locked record without a tap begins
observe_end     level, writes
level_end       level
release         level, angle_rad           like a tap: ends with release_end
release_end     level, writes
mark            text
sync            -
zero            body_rad, load_n           means with the drive off
prompt          text
acknowledged    text, waited_s
trip            cause, sentence, value, limit, halt
halt            how, cause
turning         -                          drive is off, the crank still turns
standstill      coast_s
waiting         -                          after a trip or a halt: for the operator to go on or to end
rearmed         by                         the operator goes on
refused         reason                     the board does not let itself be armed, or an input was for nothing
loss            rows, frames, overruns
notice          anything the board told
unread          records, text              so many records of the journal could not be read: put in by `haltere recover`
clock           drift_ppm, drift_std_ppm, span_s, longest_delay_s   board clock against host clock;
                longest_away_s, longest_gap_s   not reading; between two readings with rows
finished        exit_code, reason
"""

from __future__ import annotations

from dataclasses import dataclass, field
from types import UnionType
from typing import Any

#: All kinds of the table above.
KINDS = frozenset(
    (
        "run", "armed", "drive", "level", "settled", "quiet", "quiet_end", "tap", "tap_end", "tap_excluded",
        "observe", "observe_end", "level_end", "release", "release_end", "mark", "sync", "zero", "prompt",
        "acknowledged", "trip", "halt", "turning", "standstill", "loss", "notice", "clock", "finished",
        "waiting", "rearmed", "refused", "tap_reason", "unread",
    )
)  # fmt: skip

#: What the analysis reads of an event; where None is allowed it may be absent too.
READ: dict[str, dict[str, type | UnionType]] = {
    "drive": {"target_v": int | float},
    "level": {"level": int, "direction": str, "drive_v": int | float},
    "tap": {"tap": int | None, "impulse_n_m_s": int | float | None},
    "release": {"tap": int | None, "impulse_n_m_s": int | float | None},
    "tap_end": {"writes": int | None},
    "release_end": {"writes": int | None},
    "quiet_end": {"writes": int | None},
    "observe_end": {"writes": int | None},
    "tap_excluded": {"tap": int, "reason": str},
    "tap_reason": {"tap": int, "reason": str},
    "zero": {"load_n": int | float | None, "load_std_n": int | float | None},
}


@dataclass(frozen=True)
class Event:
    """Something that happened at `tick` (board ticks, unwrapped)."""

    tick: int
    kind: str
    data: dict[str, Any] = field(default_factory=dict)

    def to_json(self) -> dict[str, Any]:
        return {"tick": self.tick, "kind": self.kind, **self.data}

    @classmethod
    def from_json(cls, fields: dict[str, Any]) -> Event:
        """Inverse of `to_json`; KeyError when tick or kind is missing."""
        rest = {key: value for key, value in fields.items() if key not in ("tick", "kind")}
        return cls(int(fields["tick"]), str(fields["kind"]), rest)


def unreadable(event: Event) -> str:
    """Why the analysis could not go by an event, "" if it can."""
    for name, kind in READ.get(event.kind, {}).items():
        value = event.data.get(name)
        if not isinstance(value, kind):
            return f"the event '{event.kind}' at tick {event.tick} has {value!r} as {name}"
    return ""
