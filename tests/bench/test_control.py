"""What a client says to a bench process: inputs are taken, their words cleaned, and what cannot be taken is told."""

from __future__ import annotations

import json
import os
from collections.abc import Iterator
from typing import Any

import pytest
from trials import until

from drivers.clock import VirtualClock
from rig.bench.control import Control
from rig.bench.lines import LineReader
from rig.run.inputs import MOST_LETTERS, OperatorInput, cleaned


class Pipe:
    """A control pipe with both of its ends in this process."""

    def __init__(self) -> None:
        (taken, self._to), (told, out) = os.pipe(), os.pipe()
        self.control = Control(taken, out, VirtualClock())
        self._told = LineReader(told)
        self._open = [taken, told, out]

    def say(self, *lines: dict[str, Any]) -> list[OperatorInput]:
        """Inputs that come of lines; a mark behind them tells that all have been read."""
        for line in (*lines, {"input": "mark"}):
            os.write(self._to, json.dumps(line).encode() + b"\n")
        made: list[OperatorInput] = []
        until(lambda: made.extend(self.control.inputs()) or OperatorInput("mark") in made, what="the mark")
        return made[:-1]

    def answer(self) -> dict[str, Any] | None:
        return self._told.wait(5.0)

    def close(self) -> None:
        os.close(self._to)
        self.control.writer.close()
        self.control.reader.join()
        os.close(self._open.pop())  # its own end of what it tells
        self._told.join()
        for descriptor in self._open:
            os.close(descriptor)


@pytest.fixture
def pipe() -> Iterator[Pipe]:
    made = Pipe()
    yield made
    made.close()


def test_a_reason_comes_through_with_its_tap(pipe: Pipe) -> None:
    made = pipe.say(
        {"input": "reject", "reason": ""},
        {"input": "reason", "reason": "struck twice", "tap": 3},
        {"input": "reason", "reason": "zu heftig, 3 µm daneben"},
    )
    assert made == [
        OperatorInput("reject"),
        OperatorInput("reason", "struck twice", 3),
        OperatorInput("reason", "zu heftig, 3 µm daneben"),
    ]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("two\nlines", "two lines"),
        ("  \x1b[31mred\x07\t\r\n", "[31mred"),
        ("turned \u202eround", "turned round"),
        ("half a letter \ud800", "half a letter"),
        ("\x00nothing\x00", "nothing"),
    ],
)
def test_what_cannot_be_printed_is_a_space(pipe: Pipe, text: str, words: str) -> None:
    assert cleaned(text) == words
    for kind in ("reason", "redo", "halt"):
        assert pipe.say({"input": kind, "reason": text}) == [OperatorInput(kind, words)]


@pytest.mark.parametrize(
    ("line", "words"),
    [
        (
            {"reason": "x" * (MOST_LETTERS + 1)},
            f"has {MOST_LETTERS + 1} letters; {MOST_LETTERS} are the most",
        ),
        ({"reason": "\x00\n "}, "must have words"),
        ({}, "must have words"),
        ({"reason": None}, "must be a text, not NoneType"),
        ({"reason": ["too hard"]}, "must be a text, not list"),
        ({"reason": "too hard", "tap": "3"}, "by its number, not by '3'"),
        ({"reason": "too hard", "tap": True}, "by its number, not by 'True'"),
        ({"reason": "too hard", "tap": -1}, "by its number, not by '-1'"),
        ({"reason": "too hard", "tap": 10**300}, "by its number, not by '1000"),
    ],
)
def test_a_reason_that_cannot_be_taken_is_refused_in_a_sentence(
    pipe: Pipe, line: dict[str, Any], words: str
) -> None:
    assert pipe.say({"input": "reason", **line}) == []
    told = pipe.answer()
    assert told is not None and words in told["refused"] and "\n" not in told["refused"]
    assert pipe.say({"input": "reason", "reason": "x" * MOST_LETTERS, "tap": 0}) == [
        OperatorInput("reason", "x" * MOST_LETTERS, 0)
    ]


@pytest.mark.parametrize("reason", ["y" * 5000, None, 7, ["a"]])
def test_what_acts_is_never_held_up_by_its_words(pipe: Pipe, reason: object) -> None:
    words = "y" * MOST_LETTERS if isinstance(reason, str) else ""
    for kind in ("halt", "redo", "reject"):
        assert pipe.say({"input": kind, "reason": reason}) == [OperatorInput(kind, words)]
