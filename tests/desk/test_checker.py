"""Checks in a process of their own: the last question is answered, one that never ends is given up."""

from __future__ import annotations

import os
import signal
from collections.abc import Iterator

import pytest
from preparing import LONG_MS, shipped
from pytestqt.qtbot import QtBot

from rig.desk import checker as module
from rig.desk.checker import Checker
from rig.desk.model.checked import Checked, check

GOOD = (shipped("boom"), "boom", shipped("quick"), "quick")
BROKEN = ("rubbish ]]", "r.toml", shipped("quick"), "quick")
#: Ninety thousand unknown keys: telling what is wrong with each takes very long.
ENDLESS = ("\n".join(f"a{n} = 1" for n in range(90_000)), "r.toml", shipped("quick"), "quick")
Answers = list[tuple[int, Checked]]


@pytest.fixture
def checker(qtbot: QtBot, nothing_left: None) -> Iterator[Checker]:
    made = Checker()
    yield made
    made.rest()
    assert made.pid == 0


@pytest.fixture
def answers(checker: Checker) -> Answers:
    made: Answers = []
    checker.done.connect(lambda number, found: made.append((number, found)))
    return made


def test_the_answer_is_that_of_a_check_made_here(checker: Checker, answers: Answers, qtbot: QtBot) -> None:
    checker.ask(1, GOOD)
    assert checker.busy
    qtbot.waitUntil(lambda: len(answers) == 1, timeout=LONG_MS)
    assert answers == [(1, check(*GOOD))] and not checker.busy
    checker.ask(2, BROKEN)
    qtbot.waitUntil(lambda: len(answers) == 2, timeout=LONG_MS)
    assert answers[1] == (2, check(*BROKEN))


def test_of_many_questions_only_the_last_is_answered(
    checker: Checker, answers: Answers, qtbot: QtBot
) -> None:
    for number in range(1, 20):
        checker.ask(number, GOOD if number % 2 else BROKEN)
        qtbot.wait(1)
    qtbot.waitUntil(lambda: not checker.busy, timeout=LONG_MS)
    assert [number for number, _ in answers] == [19]


def test_one_that_does_not_end_is_given_up_for_the_next(
    checker: Checker, answers: Answers, qtbot: QtBot, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(module, "PATIENCE_MS", 50)
    checker.ask(1, GOOD)
    qtbot.waitUntil(lambda: len(answers) == 1, timeout=LONG_MS)
    first = checker.pid
    checker.ask(2, ENDLESS)
    checker.ask(3, GOOD)
    qtbot.waitUntil(lambda: len(answers) == 2, timeout=LONG_MS)
    assert answers[1][0] == 3 and checker.pid != first


def test_one_that_does_not_end_is_told_in_the_end(
    checker: Checker, answers: Answers, qtbot: QtBot, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(module, "LONGEST_MS", 300)
    with qtbot.waitSignal(checker.failed, timeout=LONG_MS) as told:
        checker.ask(7, ENDLESS)
    assert told.args is not None and told.args[0] == 7 and "did not come to an end" in told.args[1]
    assert answers == [] and not checker.busy and checker.pid == 0


def test_a_check_that_dies_is_told_and_the_next_is_made(
    checker: Checker, answers: Answers, qtbot: QtBot
) -> None:
    checker.ask(1, GOOD)
    qtbot.waitUntil(lambda: len(answers) == 1, timeout=LONG_MS)
    checker.ask(2, ENDLESS)
    with qtbot.waitSignal(checker.failed, timeout=LONG_MS) as told:
        os.kill(checker.pid, signal.SIGKILL)
    assert told.args is not None and "broken off" in told.args[1]
    checker.ask(3, GOOD)
    qtbot.waitUntil(lambda: len(answers) == 2, timeout=LONG_MS)
    assert answers[1][0] == 3


def test_what_the_numerics_cannot_do_is_a_sentence(
    checker: Checker, qtbot: QtBot, monkeypatch: pytest.MonkeyPatch
) -> None:
    with qtbot.waitSignal(checker.failed, timeout=LONG_MS) as told:
        checker.ask(1, ("a", "b", "c"))  # type: ignore[arg-type]  # one text too few stands for any exception
    assert told.args is not None and told.args[1].startswith("The dry run cannot be worked out")


def test_where_it_cannot_be_started_it_is_told(
    checker: Checker, qtbot: QtBot, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(module.sys, "executable", "/none/python")
    with qtbot.waitSignal(checker.failed, timeout=LONG_MS) as told:
        checker.ask(1, GOOD)
    assert told.args is not None and "cannot be started" in told.args[1]


def test_at_rest_nothing_is_answered(checker: Checker, answers: Answers, qtbot: QtBot) -> None:
    checker.ask(1, GOOD)
    checker.rest()
    qtbot.wait(100)
    assert answers == [] and checker.pid == 0 and not checker.busy
