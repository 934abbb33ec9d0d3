"""Events: in the time of the recording, in order, of known kinds, each begin with its end."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from rig.events import KINDS, Event

#: A command takes effect at the board's own tick, a moment before or after the row it was given at.
MARGIN_S = 1.0

ENDS = {"quiet_end": "quiet", "observe_end": "observe", "tap_end": "tap", "release_end": "release"}
BEGINS = frozenset(ENDS.values())


def event_problems(events: Sequence[Event], span: tuple[int, int] | None, tick_hz: int) -> list[str]:
    """Everything wrong with the events of a session; `span` is the first and the last tick, None without rows."""
    margin = int(MARGIN_S * tick_hz)
    problems = []
    latest = 0
    finished: Event | None = None
    for event in events:
        if span is not None and not span[0] - margin <= event.tick <= span[1] + margin:
            problems.append(f"{_named(event)} lies outside the recording")
        if event.tick < latest - margin:
            problems.append(f"{_named(event)} comes after one of tick {latest}")
        latest = max(latest, event.tick)
        if event.kind not in KINDS:
            problems.append(f"{_named(event)} is of no known kind")
        if finished is not None and event.kind in ("armed", "drive", "finished"):
            problems.append(f"{_named(event)} comes after the run had finished at tick {finished.tick}")
        if event.kind == "finished":
            finished = event
    return problems + bracket_problems(events)


def bracket_problems(events: Sequence[Event]) -> list[str]:
    """Levels, taps and quiet records that begin or end alone. A halt ends whatever is open, without an event."""
    return _brackets(events)[0]


def open_at_end(events: Sequence[Event]) -> list[str]:
    """What has begun and neither ended nor was halted when the events end: "the event 'tap 3' at tick 5000"."""
    return _brackets(events)[1]


def _brackets(events: Sequence[Event]) -> tuple[list[str], list[str]]:
    problems = []
    level: Event | None = None
    inside: Event | None = None  # the tap, release or quiet record that is open
    # Behind records that could not be read a level may go on that began there, and an interval may end.
    level_unknown = inside_unknown = False
    for event in events:
        kind = event.kind
        if kind == "unread":
            level = inside = None
            level_unknown = inside_unknown = True
        elif kind in ("trip", "halt", "finished"):
            if kind == "halt" and event.data.get("cause") == "end of the protocol":
                problems += [f"{_named(one)} has no end" for one in (inside, level) if one is not None]
            level = inside = None
            level_unknown = inside_unknown = False
        elif kind in ("level", "level_end"):
            if inside is not None:
                problems.append(f"{_named(inside)} has no end")
                inside = None
            if kind == "level":
                if level is not None:
                    problems.append(f"{_named(level)} has no end")
                level = event
            else:
                fits = level is not None and level.data.get("level") == event.data.get("level")
                if not fits and not level_unknown:
                    problems.append(f"{_named(event)} has no beginning")
                level = None
            level_unknown = inside_unknown = False
        elif kind in BEGINS:
            if inside is not None:
                problems.append(f"{_named(inside)} has no end")
            inside, inside_unknown = event, False
        elif kind in ENDS:
            fits = (
                inside is not None
                and inside.kind == ENDS[kind]
                and inside.data.get("tap") == event.data.get("tap")
            )
            if not fits and not inside_unknown:
                problems.append(f"{_named(event)} has no beginning")
            inside, inside_unknown = None, False
        elif kind == "settled" and level is None and not level_unknown:
            problems.append(f"{_named(event)} belongs to no level")
    return problems, [_named(one) for one in (inside, level) if one is not None]


def loss_event_problems(
    events: Sequence[Event],
    losses: Sequence[tuple[int, ...]],
    last_tick: int,
    unread: Sequence[tuple[int, int | None]] = (),
) -> list[str]:
    """What a run told as lost while it was on must be what its frames show.

    Not so where the journal could not be read: `unread` are first and last tick (None: to the end) of such stretches.
    """

    def known(tick: int) -> bool:
        return not any(first <= tick and (last is None or tick <= last) for first, last in unread)

    told = {event.tick: event.data for event in events if event.kind == "loss"}
    counted = {tick: dict(zip(("rows", "frames", "overruns"), rest, strict=True)) for tick, *rest in losses}
    problems = [
        f"the loss before tick {tick} was told as {_counts(told[tick])} by the run, the frames show {_counts(counts)}"
        if tick in told
        else f"the loss before tick {tick} was not told by the run"
        for tick, counts in counted.items()
        if told.get(tick) != counts and known(tick)
    ]
    # Of a recording that was cut off, the last frame may be missing though its loss was told.
    problems += [
        f"the run told a loss before tick {tick}, the frames show none"
        for tick in told
        if tick not in counted and tick <= last_tick and known(tick)
    ]
    return problems


def _named(event: Event) -> str:
    number = event.data.get("tap", event.data.get("level"))
    words = event.kind.replace("_", " ") if number is None else f"{event.kind.replace('_', ' ')} {number}"
    return f"the event '{words}' at tick {event.tick}"


def _counts(data: Mapping[str, object]) -> str:
    return f"{data.get('rows')} rows, {data.get('frames')} frames, {data.get('overruns')} overruns"
