"""`haltere replay`: a session once more as it ran, and whether it comes to the same."""

from __future__ import annotations

import argparse
import json
import math
import sys
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

from drivers.clock import Clock, HostClock
from rig.command.exits import CommandError, Exit
from rig.command.progress import RunProgress
from rig.command.seal_check import SealState
from rig.command.sessions import opened, session_rig, software
from rig.command.table import summary
from rig.evaluation.comparison import WITHIN, first_difference, told_verdicts, verdict_difference
from rig.evaluation.replay import ROWS_PER_BLOCK, Replay, Step
from rig.results import SessionResult
from rig.run.progress import Standing
from rig.session import Session, Stream
from rig.verdicts import Condition, Verdict, verdict_to_json

SLOWEST = 0.1
#: How often a replay at a speed of its own feeds rows, s of host time.
UPDATE_S = 0.02


def main(words: argparse.Namespace) -> Exit:
    if words.desk:
        return _in_the_window(words)
    speed: float | None = words.speed
    if speed is not None and not SLOWEST <= speed < math.inf:
        raise CommandError(f"--speed {speed:g}: expected a number of times real time, {SLOWEST} or more")
    with opened(words.session) as session:
        if session.recovered is not None:
            SealState(recovered=session.recovered.sentence).tell(session)
        board = session.streams["board"]
        with RunProgress(board.duration_s, quiet=words.quiet) as progress:
            verdicts, result = replayed(session, progress, speed, HostClock())
        same, sentence = agreement(session, verdicts, result)
    if words.json:
        print(json.dumps(result.to_json(), indent=2, allow_nan=False))
    else:
        print(f"{summary(result)}\n")
    # Beside JSON on stdout nothing else may stand.
    print(sentence, file=sys.stderr if words.json else sys.stdout)
    return Exit.DONE if same else Exit.DAMAGED


def _in_the_window(words: argparse.Namespace) -> Exit:
    if words.json or words.speed is not None:
        raise CommandError(
            "--desk: speed is chosen in the window, and there is no JSON; expected SESSION alone"
        )
    with opened(words.session) as session:
        if session.recovered is not None:
            SealState(recovered=session.recovered.sentence).tell(session)
    from rig.command.desk import show

    return show(Path(words.session))


def replayed(
    session: Session, progress: RunProgress, speed: float | None, clock: Clock
) -> tuple[list[Verdict], SessionResult]:
    """Verdicts and results of a session, at a multiple of real time or (None) as fast as it computes."""
    board = session.streams["board"]
    replay = Replay(session_rig(session), board, session.events)
    show = Shown(board, progress)
    steps = replay.steps(_rows_per_block(board, speed))
    try:
        for step in steps if speed is None else paced(steps, board.tick_hz, speed, clock):
            show(step)
        return replay.verdicts, replay.finish()
    except (KeyError, TypeError, ValueError) as error:
        words = f"its events or rows cannot be analysed ({type(error).__name__}: {error})"
        raise CommandError(f"{session.path}: {words}", Exit.DAMAGED) from None


def paced(steps: Iterator[Step], tick_hz: int, speed: float, clock: Clock) -> Iterator[Step]:
    """The steps, each not before its time."""
    start_s, first = clock.now_s(), -1
    for step in steps:
        if step.tick >= 0 > first:
            first = step.tick
        if first >= 0:
            clock.sleep_s(start_s + (step.tick - first) / tick_hz / speed - clock.now_s())
        yield step


def _rows_per_block(board: Stream, speed: float | None) -> int:
    if speed is None or not board.row_period_ticks:
        return ROWS_PER_BLOCK
    row_s = board.row_period_ticks / board.tick_hz
    return min(max(board.frame_rows, round(UPDATE_S * speed / row_s), 1), ROWS_PER_BLOCK)


class Shown:
    """Tells a run's progress what it would have heard from the run."""

    def __init__(self, board: Stream, progress: RunProgress) -> None:
        self._first_tick = board.first_tick
        self._tick_hz = board.tick_hz
        self._progress = progress
        self._standing = Standing(action=0, actions=0, level=-1, direction="", drive_v=0.0, body="")

    def __call__(self, step: Step) -> None:
        for event in step.events:
            data = event.data
            if event.kind == "level":
                self._standing = replace(
                    self._standing,
                    level=int(data["level"]),
                    direction=str(data["direction"]),
                    drive_v=float(data["drive_v"]),
                )
            elif event.kind == "level_end":
                self._standing = replace(self._standing, level=-1, direction="", drive_v=0.0)
        for verdict in step.verdicts:
            if isinstance(verdict, Condition):
                self._standing = replace(self._standing, body=verdict.state)
        time_s = (step.tick - self._first_tick) / self._tick_hz
        self._progress(max(time_s, 0.0), self._standing, step.verdicts)


def agreement(session: Session, verdicts: list[Verdict], result: SessionResult) -> tuple[bool, str]:
    """Whether verdicts and results are those of the session as far as it holds any, and the sentence for it.

    Other versions may come to other numbers: that is told, and no damage.
    """
    live, final = told_verdicts(session.results["live"]), session.results["final"]
    told = []
    difference = ""
    if live is not None:
        now = [verdict_to_json(verdict) for verdict in verdicts]
        difference = verdict_difference(live, now, complete=final is not None)
        told.append(f"{len(live)} verdicts")
    if final is not None:
        difference = difference or first_difference(final, json.loads(json.dumps(result.to_json())))
        told.append(f"results equal within {WITHIN}")
    if not told:
        return True, "nothing to compare: the session holds neither verdicts nor results"
    sentence = f"not the same as live: {difference}" if difference else f"the same as live: {', '.join(told)}"
    others = {session.software, session.results_software} - {software()}
    if others:
        return True, f"worked out by {' and '.join(sorted(others))}, this is {software()}; {sentence}"
    return not difference, sentence
