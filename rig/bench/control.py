"""The control pipe as the bench process sees it: an operator whose silence is heard.

from the client    {"here": 1}                          a sign of life, several times a second
                   {"input": KIND, "reason": "..."}     see rig.run.inputs; control characters become spaces
                   {"input": "reason", "reason": "...", "tap": N}   refused in a sentence if it cannot be taken
to the client      {"ready": {...}}, {"standing": {...}}, {"verdict": {...}}, {"event": {...}},
                   {"prompt": "..."}, {"refused": "..."}, {"done": {...}}, {"failed": {...}}
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from drivers.clock import Clock
from rig.bench.lines import LineReader, LineWriter
from rig.run.inputs import MOST_LETTERS, OperatorInput, cleaned

#: A client that gives no sign of life for so long may be frozen, and its halt control with it.
SILENT_S = 1.0


class Control:
    """The operator at the far end of the pipe. The end of the pipe is a halt, silence a ramp down."""

    def __init__(self, descriptor_in: int, descriptor_out: int, clock: Clock) -> None:
        self._clock = clock
        self._heard_s = clock.now_s()
        self._told_gone = self._told_silent = False
        self.reader = LineReader(descriptor_in, self._hear)
        self.writer = LineWriter(descriptor_out)

    def _hear(self) -> None:
        self._heard_s = self._clock.now_s()
        self._told_silent = False

    def inputs(self) -> Sequence[OperatorInput]:
        made = []
        for line in self.reader.take():
            if isinstance(line.get("input"), str):
                made += self._input(line)
        if self.reader.ended and not self._told_gone:
            self._told_gone = True
            made.append(OperatorInput("halt", "the program that ran this bench has gone; drive off"))
        if self.reader.ended:
            made.append(OperatorInput("end"))  # nobody is there to go on
        silent_s = self._clock.now_s() - self._heard_s
        if silent_s > SILENT_S and not self._told_silent and not self._told_gone:
            self._told_silent = True
            words = (
                f"the program that runs this bench has been silent for {silent_s:.1f} s; drive ramped down"
            )
            made.append(OperatorInput("stop", words))
        return made

    def _input(self, line: dict[str, Any]) -> list[OperatorInput]:
        """What acts is never held up by its words; a reason is nothing but words, and refused in a sentence."""
        kind, told, tap = line["input"], line.get("reason", ""), line.get("tap")
        reason = cleaned(told) if isinstance(told, str) else ""
        if kind != "reason":
            return [OperatorInput(kind, reason[:MOST_LETTERS])]
        refused = ""
        if not isinstance(told, str):
            refused = f"a reason for a tap left out must be a text, not {type(told).__name__}"
        elif not reason:
            refused = "a reason for a tap left out must have words"
        elif len(reason) > MOST_LETTERS:
            refused = f"a reason for a tap left out has {len(reason)} letters; {MOST_LETTERS} are the most"
        elif tap is not None and (type(tap) is not int or not 0 <= tap < 2**32):
            refused = f"a reason names its tap by its number, not by {str(tap)[:20]!r}"
        if refused:
            self.writer.send({"refused": refused})
            return []
        return [OperatorInput(kind, reason, tap)]

    def prompt(self, text: str) -> None:
        self.writer.send({"prompt": text})
