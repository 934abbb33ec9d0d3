"""All checks of a session file, each on its own, so that one damage does not hide another."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from drivers.channels import Channel
from rig.description import RigDescription
from rig.evaluation.comparison import WITHIN, differences, told_verdicts, verdict_difference
from rig.evaluation.replay import Replay
from rig.problem import FileProblems
from rig.record import overview
from rig.record.digests import problems as digest_problems
from rig.record.errors import Damaged
from rig.record.recovery import Recovery
from rig.session import Session, Stream, open_session
from rig.verdicts import verdict_to_json
from rig.verification.check import NOT_CHECKED, WRONG, Check, counted, found, skipped
from rig.verification.course import MARGIN_S, event_problems, loss_event_problems, open_at_end
from rig.verification.rows import RowsFound, clock_problems, go_through, loss_problems

NAMES = ("structure", "digests", "clock", "rows", "events", "texts", "overview", "results")


def verify(path: Path, software: str, rig_of: Callable[[Session], RigDescription]) -> list[Check]:
    """The checks in order of NAMES. `software` is this version, `rig_of` the rig of a session with its seed.

    FileNotFoundError if there is no such file.
    """
    checks: list[Check] = []
    try:
        session = open_session(path)
    except Damaged as error:
        checks.append(found("structure", [str(error)], ""))
        checks.append(_digests(path))
        return checks + [skipped(name, "the file cannot be opened") for name in NAMES[2:]]
    with session:
        board = session.streams["board"]
        checks.append(found("structure", [], _structure(session)))
        checks.append(_digests(path))
        rows = _gone_through(board)
        checks += [_clock(board, rows), _rows(board, rows), _events(session)]
        checks += [_texts(session, software), _overview(board), _results(session, software, rig_of)]
    return checks


def _structure(session: Session) -> str:
    board = session.streams["board"]
    told = f"{counted(len(board), 'row')} of {counted(len(board.channels), 'channel')}, "
    told += counted(len(session.events), "event")
    return f"{told}; {session.recovered.sentence}" if session.recovered is not None else told


def _digests(path: Path) -> Check:
    try:
        problems = digest_problems(path)
    except Damaged:
        return skipped("digests", "the file cannot be looked through")
    if problems is None:
        return found("digests", ["the session has none, and every session is sealed with them"], "")
    return found("digests", problems, "everything is as it was when it was sealed, or amended since")


def _gone_through(board: Stream) -> RowsFound | Damaged:
    try:
        parts = zip(board.parts("tick"), board.parts("time_s"), strict=True)
        return go_through(parts, board.tick_hz, board.row_period_ticks)
    except Damaged as error:
        return error


def _clock(board: Stream, rows: RowsFound | Damaged) -> Check:
    if isinstance(rows, Damaged):
        return found("clock", [str(rows)], "")
    steps = f"in steps of {board.row_period_ticks}" if board.row_period_ticks else "with no row period told"
    return found("clock", clock_problems(rows), f"ticks increase {steps}, times follow from them")


def _rows(board: Stream, rows: RowsFound | Damaged) -> Check:
    if isinstance(rows, Damaged):
        return skipped("rows", "the ticks cannot be read")
    if rows.backward or rows.uneven or not board.row_period_ticks:
        why = "they can be counted by ticks in whole row periods only"
        return skipped("rows", why, due=bool(board.row_period_ticks))
    problems = loss_problems(rows, board.losses, board.first_tick, board.last_tick, board.row_period_ticks)
    lost = sum(loss[1] for loss in board.losses)
    good = f"{counted(rows.rows, 'row')} without a gap"
    if rows.gaps:
        good = (
            f"{counted(rows.rows, 'row')} and {lost} lost, in {counted(len(rows.gaps), 'gap')} told as such"
        )
    return found("rows", problems, good)


def _events(session: Session) -> Check:
    board, events = session.streams["board"], session.events
    try:
        span = (board.first_tick, board.last_tick) if len(board) else None
    except Damaged:
        span = None
    problems = event_problems(events, span, board.tick_hz)
    recovered = session.recovered
    cut_off = recovered is not None and not recovered.ended
    still_open = open_at_end(events)
    if not cut_off:
        problems += [f"{one} has no end" for one in still_open]
    if any(event.kind in ("run", "unread") for event in events):  # journalled by a run, not by a script
        problems += loss_event_problems(
            events, session.losses, span[1] if span else 0, _unread_ticks(recovered, board.tick_hz)
        )
    good = f"{len(events)} in order, each begin with its end or cut short by a halt"
    if recovered is not None and recovered.with_gap:
        good += ", as far as the journal could be read"
    if cut_off and still_open:
        good += f", but for {' and '.join(still_open)}, in which the journal ends"
    return found("events", problems, good)


def _unread_ticks(recovered: Recovery | None, tick_hz: int) -> list[tuple[int, int | None]]:
    """Stretches of time in which losses may be there that the run's events do not tell, or the other way round."""
    if recovered is None:
        return []
    stretches = [(one.from_tick or 0, one.to_tick) for one in recovered.unread]
    return [(max(0, first - int(MARGIN_S * tick_hz)), last) for first, last in stretches]


def _texts(session: Session, software: str) -> Check:
    unread: list[str] = []
    for read in (lambda: session.rig, lambda: session.protocol):
        try:
            read()
        except FileProblems as error:
            unread += [str(problem) for problem in error.problems]
    problems = _header_problems(session.header, session.streams["board"])
    if unread and session.software != software and not problems:
        why = f"written by {session.software}, {software} does not read them: {unread[0]}"
        return skipped("texts", why, due=False)
    return found(
        "texts", unread + problems, "rig and protocol can be read, the header agrees with the columns"
    )


def _header_problems(header: dict[str, Any], board: Stream) -> list[str]:
    problems = [
        f"the header gives {header.get(name, 0)!r} as {name}, the stream {getattr(board, name)}"
        for name in ("tick_hz", "row_period_ticks", "frame_rows")
        if header.get(name, 0) != getattr(board, name)
    ]
    try:
        told = [Channel(**fields) for fields in header["channels"]]
    except (KeyError, TypeError):
        told = []
    if told != list(board.channels):
        problems.append("the channel table in the header is not that of the columns")
    return problems


def _overview(board: Stream) -> Check:
    wanted = overview.levels(len(board))
    problems: list[str] = []
    checked = 0
    for channel in board.channels:
        try:
            stored = board.stored_levels(channel.name)
            made = overview.pyramid(board.parts(channel.name), len(board)) if stored else {}
        except (Damaged, ValueError, TypeError, AttributeError) as error:
            problems.append(f"that of {channel.name} cannot be compared ({error})")
            continue
        checked += bool(stored)
        if sorted(stored) != wanted:
            problems.append(f"that of {channel.name} has bins of {sorted(stored)} rows, expected {wanted}")
        elif not all(_equal(stored[size], made[size]) for size in stored):
            problems.append(f"that of {channel.name} does not follow from its rows")
    if wanted and not checked and len(problems) == len(board.channels):
        problems = ["the session has none, and every session of so many rows is sealed with one"]
    good = f"of {counted(checked, 'channel')}, each bin the least and greatest of its rows"
    return found("overview", problems, good if wanted else "none, the rows are too few to need one")


def _equal(one: NDArray[np.int32], other: NDArray[np.int32]) -> bool:
    return one.dtype == other.dtype and np.array_equal(one, other)


def _results(session: Session, software: str, rig_of: Callable[[Session], RigDescription]) -> Check:
    live, final = told_verdicts(session.results["live"]), session.results["final"]
    if live is None and final is None:
        return skipped("results", "the session holds neither verdicts nor results", due=False)
    others = sorted({session.software, session.results_software} - {software})
    if others:
        return skipped("results", f"worked out by {' and '.join(others)}, this is {software}", due=False)
    try:
        again = Replay(rig_of(session), session.streams["board"], session.events)
        for _ in again.steps():
            pass
        now = json.loads(json.dumps(again.finish().to_json()))
    except (Damaged, FileProblems):
        return skipped("results", "rows or rig cannot be read")
    except (ArithmeticError, LookupError, TypeError, ValueError) as error:
        return found("results", [f"the analysis cannot be done ({type(error).__name__}: {error})"], "")
    problems: list[str] = []
    if live is not None:
        verdicts = [verdict_to_json(verdict) for verdict in again.verdicts]
        difference = verdict_difference(live, verdicts, complete=final is not None)
        problems += [difference] if difference else []
    if final is not None:
        problems += differences(final, now)
    told = [counted(len(live), "verdict")] if live is not None else []
    told += ["the results"] if final is not None else []
    return found("results", problems, f"{' and '.join(told)} follow from rows and events within {WITHIN}")


def sound(checks: list[Check]) -> bool:
    """Whether nothing is wrong, and no check is missing that a sound session would have allowed."""
    return not any(check.outcome == WRONG or (check.outcome == NOT_CHECKED and check.due) for check in checks)
