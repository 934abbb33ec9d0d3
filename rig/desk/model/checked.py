"""What a rig file and a protocol come to together: every mistake, or the dry run in sentences."""

from __future__ import annotations

from dataclasses import dataclass

from rig.description import RigDescription
from rig.files.forecast import Forecast, forecast
from rig.files.lines import LARGEST_BYTES
from rig.files.protocol import protocol_from_text
from rig.files.rig import rig_from_text
from rig.problem import FileProblems, Problem, printable
from rig.steps import Protocol

#: Problems of one file that are told one by one; of the rest only the number.
MOST_TOLD = 200


@dataclass(frozen=True)
class Checked:
    """Result of one check. `rig` and `protocol` are None where their file has problems."""

    rig: RigDescription | None = None
    protocol: Protocol | None = None
    forecast: Forecast | None = None
    rig_problems: tuple[Problem, ...] = ()
    protocol_problems: tuple[Problem, ...] = ()
    untold: int = 0  # problems beyond those listed

    @property
    def good(self) -> bool:
        """Whether both files are without mistakes and the dry run was worked out."""
        return self.rig is not None and self.protocol is not None and self.forecast is not None

    @property
    def problem_count(self) -> int:
        return len(self.rig_problems) + len(self.protocol_problems) + self.untold

    @property
    def crossings(self) -> tuple[str, ...]:
        """Limits the dry run would cross, a sentence each."""
        return self.forecast.crossings if self.forecast is not None else ()

    def is_of(self, rig_text: str, protocol_text: str) -> bool:
        """Whether it is about these very texts."""
        return (
            self.rig is not None
            and self.protocol is not None
            and (self.rig.text, self.protocol.text) == (rig_text, protocol_text)
        )


def check(rig_text: str, rig_name: str, protocol_text: str, protocol_name: str) -> Checked:
    """Read both texts and make the dry run. Takes 0.1 to 1 s for a usual protocol, longer for a long one."""
    rig = protocol = None
    rig_problems: tuple[Problem, ...] = ()
    protocol_problems: tuple[Problem, ...] = ()
    try:
        _be_writable(rig_text, rig_name)
        rig = rig_from_text(rig_text, rig_name)
    except FileProblems as error:
        rig_problems = error.problems
    try:
        _be_writable(protocol_text, protocol_name)
        protocol = protocol_from_text(protocol_text, protocol_name, rig)
    except FileProblems as error:
        protocol_problems = error.problems
    made = forecast(rig, protocol) if rig is not None and protocol is not None else None
    untold = sum(max(0, len(found) - MOST_TOLD) for found in (rig_problems, protocol_problems))
    return Checked(rig, protocol, made, rig_problems[:MOST_TOLD], protocol_problems[:MOST_TOLD], untold)


def _be_writable(text: str, name: str) -> None:
    """What the reader of files refuses, for text that has not been a file yet. FileProblems."""
    try:
        size = len(text.encode())
    except UnicodeEncodeError as error:
        line = text.count("\n", 0, error.start) + 1
        letter = f"{ord(text[error.start]):#06x}"
        raise FileProblems([Problem(name, line, "", f"the letter {letter}", "UTF-8 text")]) from None
    if size > LARGEST_BYTES:
        problem = Problem(name, 0, "", f"more than {LARGEST_BYTES} bytes", "a text file below 1 MiB")
        raise FileProblems([problem])


def problem_sentence(problem: Problem) -> str:
    """A problem for a list that is grouped by file: "line 12, limits.current = 6 V: expected ..."."""
    place = f"line {problem.line}" if problem.line else "the file"
    key = f", {problem.key}" if problem.key else ""
    value = f" = {problem.value}" if problem.key and problem.value else ""
    alone = f", {problem.value}" if problem.value and not problem.key else ""
    return printable(f"{place}{key}{value}{alone}: expected {problem.expected}")


def time_words(time_s: float) -> str:
    """A duration as it is said: "40 s", "12 min", "3 h 20 min"."""
    if time_s < 99.5:
        return f"{time_s:.0f} s"
    minutes = round(time_s / 60.0)
    if minutes < 100:
        return f"{minutes} min"
    return f"{minutes // 60} h {minutes % 60:02d} min"


def forecast_sentences(told: Forecast) -> list[str]:
    """The dry run without its levels and without the limits it would cross."""
    lasts = f"Takes about {time_words(told.duration_s)}"
    if round(told.at_most_s) > round(told.duration_s):
        lasts += f", at most {time_words(told.at_most_s)}"
    lines = [f"{lasts}."]
    if told.top_flap_hz is not None:
        lines.append(f"Top flap rate {told.top_flap_hz:.1f} Hz.")
    if told.hottest_deg_c is not None:
        lines.append(f"Winding at most about {told.hottest_deg_c:.0f} °C.")
    if told.coast_down_s is not None:
        lines.append(
            f"From the top rate the crank coasts for about {told.coast_down_s:.1f} s: off does not mean stopped."
        )
    if not any(level.flap_hz is not None for level in told.levels):
        lines.append("Flap rates, currents and heat are not known beforehand: the rig file lacks constants.")
    return lines
