"""The verdicts of a session, as the first thing a reader sees."""

from __future__ import annotations

from dataclasses import dataclass

from analysis.counting import counted
from rig.report.rounding import NOT_KNOWN, bare, fixed, interval_text, measured_text, value_text
from rig.report.wording import DIRECTION_SIGNS, KIND_WORDS, VERDICT_WORDS, opening, sentence, words
from rig.results import Boundary, Finding, Measured, SessionResult

#: Names and units of the numbers a finding may carry.
NUMBER_WORDS = {
    "slope": ("slope of slow stiffness on flap rate squared", ""),
    "theory_slope": ("the same slope from theory", ""),
    "intercept": ("stiffness of the line at rest", "1/s²"),
    "smallest_gain_seen": ("smallest feedback gain that would have been seen", "V/rad"),
}


@dataclass(frozen=True)
class BoundaryCard:
    """One side of the boundary in large type."""

    sign: str
    direction: str
    located: bool
    flap: str
    flap_interval: str
    drive: str
    drive_interval: str
    kind: str
    reason: str


@dataclass(frozen=True)
class FindingLine:
    question: str
    sign: str
    verdict: str
    reason: str
    numbers: tuple[tuple[str, str], ...]


@dataclass(frozen=True)
class TheoryLine:
    name: str
    predicted: str
    difference: str
    agreement: str


def boundary_card(direction: str, boundary: Boundary) -> BoundaryCard:
    located = boundary.kind != "not_located" and boundary.flap_hz.value is not None
    return BoundaryCard(
        sign=DIRECTION_SIGNS[direction],
        direction=direction,
        located=located,
        flap=value_text(boundary.flap_hz) if located else "not located",
        flap_interval=interval_text(boundary.flap_hz) or NOT_KNOWN,
        drive=value_text(boundary.drive_v),
        drive_interval=interval_text(boundary.drive_v) or NOT_KNOWN,
        kind=sentence(KIND_WORDS.get(boundary.kind, words(boundary.kind))),
        reason=sentence(boundary.reason),
    )


def finding_line(question: str, finding: Finding) -> FindingLine:
    sign, verdict = VERDICT_WORDS.get(finding.verdict, ("?", words(finding.verdict)))
    numbers = []
    for name, number in finding.numbers.items():
        told, unit = NUMBER_WORDS.get(name, (words(name), ""))
        numbers.append((opening(told), measured_text(number, unit)))
    return FindingLine(question, sign, opening(verdict), sentence(finding.reason), tuple(numbers))


def findings(result: SessionResult) -> tuple[FindingLine, ...]:
    """The three questions a reviewer asks of a body that holds itself."""
    return (
        finding_line("Is it vibration that holds the body?", result.vibration),
        finding_line("Did it hold without feedback (passive)?", result.passivity),
        finding_line("Is it more than friction?", result.friction),
    )


def theory_lines(result: SessionResult) -> tuple[TheoryLine, ...]:
    """Predicted boundaries against the falling boundary found, where both are known."""
    theory = result.theory
    found = result.falling.flap_hz if result.falling.kind != "not_located" else Measured()
    lines = []
    for name, predicted in (
        ("averaged potential, fold with lift and offset", theory.averaged_fold_hz),
        ("Floquet, periodic orbit of the complete model", theory.floquet_hz),
        ("Mathieu, undamped limit without lift or offset", theory.mathieu_hz),
    ):
        lines.append(_theory_line(name, "Hz", predicted, found))
    drive = result.falling.drive_v if result.falling.kind != "not_located" else Measured()
    if theory.floquet_v is not None:
        lines.append(_theory_line("Floquet, drive", "V", theory.floquet_v, drive))
    return tuple(lines)


def _theory_line(name: str, unit: str, predicted: float | None, found: Measured) -> TheoryLine:
    if predicted is None:
        return TheoryLine(name, NOT_KNOWN, "", "not testable")
    told = f"{bare(predicted, 5)} {unit}"
    if found.value is None or predicted == 0.0:
        return TheoryLine(name, told, "", "no measured boundary to compare")
    percent = 100.0 * (found.value / predicted - 1.0)
    difference = ("+" if percent > 0.0 else "") + fixed(percent, 2) + " %"
    if found.low is None or found.high is None:
        return TheoryLine(name, told, difference, "interval not known")
    inside = found.low <= predicted <= found.high
    return TheoryLine(
        name, told, difference, "inside the 95 % interval" if inside else "outside the 95 % interval"
    )


def headline(result: SessionResult) -> str:
    """What the session found, in one sentence."""
    falling = result.falling.kind != "not_located" and result.falling.flap_hz.value is not None
    rising = result.rising.kind != "not_located" and result.rising.flap_hz.value is not None
    if falling and rising:
        return (
            f"Falling, the body holds itself down to {value_text(result.falling.flap_hz)} Hz; "
            f"rising, it is captured from {value_text(result.rising.flap_hz)} Hz."
        )
    if falling:
        return f"Falling, the body holds itself down to {value_text(result.falling.flap_hz)} Hz."
    if rising:
        return f"Rising, the body is captured from {value_text(result.rising.flap_hz)} Hz."
    held = sum(level.state == "held" for level in result.levels)
    if not result.levels:
        return "No level was measured: there is no verdict."
    return f"No boundary was located; the body was held at {held} of {counted(len(result.levels), 'level')}."
