"""The steps a bench protocol is made of, as pure data in SI units.

`rig.files.protocol` reads them from a protocol file; `rig.run` carries them out.
Impulses are in N m s, positive lifts the head.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, kw_only=True)
class Step:
    """Base of all steps; `line` is where the step stands in its file."""

    line: int = 0
    label: str = ""


@dataclass(frozen=True, kw_only=True)
class Ramp(Step):
    """Drive to `to_v` at `slew_v_per_s` (None: the rig's limit), and wait until it is there."""

    to_v: float
    slew_v_per_s: float | None = None


@dataclass(frozen=True, kw_only=True)
class Hold(Step):
    """Stay at this drive: a fixed time, until the body has settled, or until the decay rate is known
    to `precision_per_s` (95 % half-width; taps with `impulse_n_m_s` until it is). `at_most_s` bounds both."""

    for_s: float | None = None
    until: str | None = None  # "settled" | "precise"
    precision_per_s: float | None = None
    impulse_n_m_s: float | None = None
    tap_observe_s: float = 4.0
    by: str = "tapper"
    at_most_s: float = 60.0


@dataclass(frozen=True, kw_only=True)
class Tap(Step):
    """One tap, then `observe_s` with the drive locked."""

    impulse_n_m_s: float
    observe_s: float = 4.0
    by: str = "tapper"  # "tapper" | "hand"


@dataclass(frozen=True, kw_only=True)
class Release(Step):
    """Let the body go from rest at `angle_rad`, then observe."""

    angle_rad: float
    observe_s: float = 4.0


@dataclass(frozen=True, kw_only=True)
class Observe(Step):
    """Watch for a time with the drive locked and no tap."""

    for_s: float


@dataclass(frozen=True, kw_only=True)
class Mark(Step):
    text: str


@dataclass(frozen=True, kw_only=True)
class Sync(Step):
    """One pulse on the sync line, for a camera."""


@dataclass(frozen=True, kw_only=True)
class Zero(Step):
    """Average the encoders over `for_s` with the drive off and write the zero down (and check it)."""

    for_s: float = 1.0


@dataclass(frozen=True, kw_only=True)
class Prompt(Step):
    """Ask the operator; goes on when acknowledged, or after `at_most_s`."""

    text: str
    at_most_s: float = 60.0


@dataclass(frozen=True, kw_only=True)
class Staircase(Step):
    """Levels of constant drive, each: ramp there, settle, quiet record, taps.

    `levels_v` are in the order they are visited (already sorted, shuffled or looped by the reader).
    `directions` has one of "rising" | "falling" per level. `returns_to_v`/`return_every`: after every so
    many levels go back to the reference level (a full level of its own, role "reference").
    """

    levels_v: tuple[float, ...]
    directions: tuple[str, ...]
    roles: tuple[str, ...] = ()  # "level" | "reference" per level; empty: all "level"
    order: str = "rising"  # as written: rising, falling, shuffled, loop
    slew_v_per_s: float | None = None
    settle_s: float = 3.0  # at least
    settle_at_most_s: float = 10.0
    quiet_s: float = 2.0  # undisturbed record before the first tap, locked
    taps_n_m_s: tuple[float, ...] = ()
    tap_observe_s: float = 4.0
    by: str = "tapper"
    precision_per_s: float | None = None  # enough taps when the decay's half-width is below
    stop_after_lost: int = 0  # end the staircase after so many levels in a row without a held body


@dataclass(frozen=True, kw_only=True)
class Repeat(Step):
    times: int
    steps: tuple[Step, ...] = ()


@dataclass(frozen=True)
class Protocol:
    """A protocol file: its steps plus the file as read."""

    name: str
    title: str
    steps: tuple[Step, ...]
    notes: str = ""
    sha256: str = ""
    text: str = ""
