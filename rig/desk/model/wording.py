"""The words and the shapes of the window: phases, states, regimes, taps, limits, link, disk.

A shape goes with every word, so that nothing rests on colour; `rig.desk.widgets.shapes` draws them.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from rig.desk.model.run_model import Rung, RunModel, TapMark, Tripped
from rig.run.interlocks import WHAT_NOW

PHASE_SHAPES = {
    "idle": "ring",
    "starting": "dotted",
    "ready": "right_hollow",
    "running": "right",
    "stopping": "down",
    "turning": "turning",
    "waiting": "bars",
    "finished": "square",
    "failed": "cross",
}
STATE_WORDS = {
    "held": "held",
    "at_stop": "at end stop",
    "bouncing": "bouncing",
    "friction_held": "friction holds",
    "lost": "lost",
}
OUTCOME_WORDS = {
    "observed": "under way",
    "accepted": "accepted",
    "double": "double hit",
    "lost": "lost",
    "left_out": "left out",
    "excluded": "excluded",
}
OUTCOME_SHAPES = {
    "observed": "half",
    "accepted": "disc",
    "double": "twin",
    "lost": "cross",
    "left_out": "ring",
    "excluded": "struck",
}
#: Why a tap is left out as a rule, in the order of their keys (common practice, no source); anything else is typed.
REASONS = ("struck twice", "wrong way", "too hard", "too gentle", "body or cable touched")
OTHER_WORDS = "other words"
LIMIT_WORDS = {
    "current": "current",
    "voltage": "voltage",
    "winding": "winding",
    "travel": "travel",
    "flap_rate": "flap rate",
    "load": "load",
    "loss": "lost rows",
    "stale": "age of the rows",
    "disk": "free disk",
    "stall": "crank at rest",
    "refused": "refused command",
    "board": "the board itself",
}
UNIT_WORDS = {"degC": "°C", "deg": "°", "1": "%"}
NEAR_SHARE = 0.8
LOW_DISK_BYTES = 1e9
LATE_MS = 200.0
SILENT_MS = 1000.0
#: Half-width of a 95 % interval in standard deviations (normal distribution).
HALF_WIDTH = 1.96


def said(term: str) -> str:
    """A state or regime as words."""
    return STATE_WORDS.get(term, term.replace("_", " "))


def opening(text: str) -> str:
    """Capital first letter; the rest keeps its case."""
    return text[:1].upper() + text[1:]


# -- levels and taps -----------------------------------------------------------------------------------


def level_word(rungs: Sequence[Rung]) -> str:
    """What is known of a level after its visits, in one or two words."""
    regimes = {rung.regime for rung in rungs if rung.regime in ("stable", "unstable")}
    if len(regimes) > 1:
        return "stable and not"
    if regimes:
        return regimes.pop()
    last = rungs[-1]
    if last.state and last.state != "held":
        return said(last.state)
    if last.ended:
        return "undetermined" if last.regime else "broken off"
    return "measuring" if last.settled or last.taps else "settling"


def filling(rungs: Sequence[Rung]) -> str:
    """How a level is drawn: filled, crossed, hollow, or open while nothing is known."""
    regimes = {rung.regime for rung in rungs if rung.regime in ("stable", "unstable")}
    if len(regimes) == 1:
        return "filled" if "stable" in regimes else "crossed"
    away = rungs[-1].state in ("bouncing", "at_stop", "lost") and rungs[-1].regime != ""
    if away and not regimes:
        return "crossed"
    return "hollow" if regimes or (rungs[-1].regime and rungs[-1].ended) else "open"


def tap_sentence(mark: TapMark) -> str:
    """One tap in a line: number, outcome, reason."""
    words = OUTCOME_WORDS.get(mark.outcome, mark.outcome)
    reason = f": {mark.reason}" if mark.reason not in ("", words, "returned") else ""
    return f"Tap {mark.tap} {words}{reason}"


def tap_details(mark: TapMark, seconds: float) -> str:
    """Everything about a tap, one fact a line."""
    by = {"tapper": "by the tapper", "hand": "by hand", "release": "let go"}.get(mark.by, mark.by)
    lines = [tap_sentence(mark), f"at {seconds:.2f} s, {by}" if by else f"at {seconds:.2f} s"]
    if mark.impulse_n_m_s is not None:
        lines.append(f"impulse {1e3 * mark.impulse_n_m_s:+.3f} mN m s")
    if mark.decay_per_s is not None:
        width = f" ± {HALF_WIDTH * mark.decay_std_per_s:.3f}" if mark.decay_std_per_s is not None else ""
        lines.append(f"decay rate {mark.decay_per_s:.3f}{width} 1/s" + (" (95 %)" if width else ""))
    return "\n".join(lines)


# -- limits --------------------------------------------------------------------------------------------


def used_share(margin: Mapping[str, Any]) -> float:
    """Share of a limit that is used, 0 to 1 and beyond."""
    limit = abs(float(margin["limit"]))
    return abs(float(margin["value"])) / limit if limit else math.inf


def margin_words(margin: Mapping[str, Any]) -> tuple[str, str, str]:
    """Name, "value of limit unit", and a word when little is left ("" otherwise)."""
    cause, unit = str(margin["cause"]), str(margin["unit"])
    scale = 100.0 if unit == "1" else 1.0
    value, limit = scale * float(margin["value"]), scale * float(margin["limit"])
    digits = 0 if abs(limit) >= 50.0 else 1 if abs(limit) >= 10.0 else 2
    told = f"{value:.{digits}f}"
    if not told.strip("-0."):
        told = told.lstrip("-")
    space = "" if unit == "deg" else " "
    share = used_share(margin)
    word = "over" if share > 1.0 else "near" if share > NEAR_SHARE else ""
    return (
        LIMIT_WORDS.get(cause, cause.replace("_", " ")),
        f"{told} of {round(limit, 3):g}{space}{UNIT_WORDS.get(unit, unit)}",
        word,
    )


def trip_words(trip: Tripped) -> tuple[str, str]:
    """What happened, and what must happen before arming again, of the sentence of a trip."""
    what_now = WHAT_NOW.get(trip.cause, "")
    happened = trip.sentence.strip()
    tail = f": {what_now}."
    if what_now and happened.endswith(tail):
        happened = happened[: -len(tail)] + "."
    then = what_now or "find out why at the bench"
    for ending in (" before arming again", ", then arm again", " and arm again"):
        then = then.removesuffix(ending)
    return happened, f"Before arming again: {then}."


# -- prompts -------------------------------------------------------------------------------------------


def asks(model: RunModel) -> bool:
    """Whether the prompt shown waits to be acknowledged: a call to tap does not."""
    return bool(model.prompt) and not model.prompt.startswith("tap now")


def tap_to_judge(model: RunModel) -> TapMark | None:
    """The last tap of the level the run is at, while it can still be taken back."""
    here = model.on_hand
    if model.phase != "running" or here is None or not here.taps:
        return None
    return here.taps[-1]


def waiting_sentence(model: RunModel) -> str:
    """Why the run waits: the latest trip, or that somebody halted it."""
    if model.trips:
        return model.trips[-1].sentence
    return "Halted. The drive is off and the crank stands still."


# -- disk and link -------------------------------------------------------------------------------------


def disk_words(free_bytes: int | None) -> tuple[str, bool]:
    """Free disk, and whether it is low."""
    if free_bytes is None:
        return "not known", False
    low = free_bytes < LOW_DISK_BYTES
    if free_bytes < 1e9:
        return f"{free_bytes / 1e6:.0f} MB, low", low
    digits = 1 if free_bytes < 10e9 else 0
    return f"{free_bytes / 1e9:.{digits}f} GB free", low


def link_words(age_ms: float | None, lost_share: float, lost_rows: int) -> tuple[str, str, str]:
    """Shape, word and details of the link's health."""
    lost = f"{lost_rows} lost" if lost_rows else "none lost"
    if age_ms is None:
        return "ring", "no link", ""
    told = f"{age_ms:.0f} ms" if age_ms < 9999.5 else f"{age_ms / 1e3:.0f} s"
    details = f"{told}, {lost}"
    if age_ms >= SILENT_MS:
        return "cross", "silent", details
    if age_ms >= LATE_MS:
        return "half", "late", details
    if lost_share > 0.0:
        return "struck", "losing rows", details
    return "disc", "steady", details


def lost_share(model: RunModel) -> float:
    """Share of rows lost of late, from its limit's margin."""
    shares = [float(one["value"]) for one in model.margins if one.get("cause") == "loss"]
    return shares[0] if shares else 0.0
