"""The words of the report: states, regimes and verdicts as a person at the bench would say them."""

from __future__ import annotations

STATE_WORDS = {
    "held": "held",
    "at_stop": "at an end stop",
    "bouncing": "bouncing between stops",
    "friction_held": "held by friction",
    "lost": "lost",
}
#: Sign and word of each regime; the sign repeats the word for a quick glance, also in black and white.
REGIME_SIGNS = {"stable": "●", "unstable": "✕", "undetermined": "○"}
VERDICT_WORDS = {
    "supported": ("✓", "supported"),
    "not_supported": ("✕", "not supported"),
    "not_testable": ("?", "not testable"),
}
DIRECTION_SIGNS = {"rising": "▲", "falling": "▼"}
KIND_WORDS = {
    "divergence": "the slow stiffness reaches zero (divergence)",
    "flutter": "the decay rate reaches zero at a finite slow frequency (flutter)",
    "capture": "the body is captured from its end stop",
    "not_located": "not located",
}
HALT_WORDS = {
    "coast": "coast (enable off)",
    "brake": "brake (bridge shorted)",
    "ramp": "ramp to zero, then coast",
}


def words(term: str) -> str:
    """A term of the result tables as plain words."""
    return STATE_WORDS.get(term, term.replace("_", " "))


def opening(text: str) -> str:
    """Capital first letter, the rest as it is: units and names keep their case."""
    return text[:1].upper() + text[1:]


def sentence(text: str) -> str:
    """Capital first letter and a full stop."""
    text = opening(text.strip().replace("+-", "±"))
    return text if not text or text[-1] in ".!?" else text + "."


def seconds(time_s: float | None) -> str:
    return "not known" if time_s is None else f"{time_s:.2f}"


def duration(time_s: float) -> str:
    minutes, rest = divmod(time_s, 60.0)
    return f"{int(minutes)} min {rest:.0f} s" if minutes else f"{rest:.1f} s"
