"""What stands behind a damage in a journal comes back, if it is certain that it belongs there."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from small_journal import ROWS, frame, header, write

from drivers.rows import RowFrame
from rig.events import Event
from rig.record import journal as jn
from rig.record import resumption
from rig.record.errors import Damaged
from rig.record.journal import Journal, JournalWriter
from rig.record.recording import Recording, read_recording
from rig.record.recovery import PLACE, Recovery
from rig.record.sealing import seal
from rig.session import open_session

FRAMES = 60
FIRST = frame(0).tick


def frames_of(found: Recording) -> list[int]:
    """Which of the frames came back; every row of each is as it was written, at its own tick."""
    numbers = [int(raw[0]) // 1000 for raw in found.raw[::ROWS]]
    rows = np.concatenate([frame(k).raw for k in numbers]) if numbers else np.empty((0, 4), np.int32)
    np.testing.assert_array_equal(found.raw, rows)
    ticks = [FIRST + (ROWS * k + row) * 1000 for k in numbers for row in range(ROWS)]
    np.testing.assert_array_equal(found.tick.astype(np.int64), ticks)
    return numbers


@pytest.fixture
def journal(tmp_path: Path) -> Path:
    write(tmp_path / "a.journal", FRAMES)
    return tmp_path / "a.journal"


def frame_starts(path: Path) -> list[int]:
    return [record.start for record in Journal(path) if record.kind == jn.FRAME]


Spoil = Any
RANDOM = np.random.default_rng(8)
SPOILED: dict[str, Spoil] = {
    "zeros": lambda data, a, b: data[:a] + bytes(b - a) + data[b:],
    "ones": lambda data, a, b: data[:a] + b"\xff" * (b - a) + data[b:],
    "noise": lambda data, a, b: data[:a] + RANDOM.bytes(b - a) + data[b:],
    "heads without end": lambda data, a, b: (
        data[:a] + (jn.HEAD.pack(7, 60, 30) * (b - a))[: b - a] + data[b:]
    ),
    "a piece of itself": lambda data, a, b: data[:a] + data[a - (b - a) : a] + data[b:],
    "cut out": lambda data, a, b: data[:a] + data[b:],
    "noise put in": lambda data, a, b: data[:a] + RANDOM.bytes(b - a) + data[a:],
}


@pytest.mark.parametrize("what", SPOILED)
@pytest.mark.parametrize("length", [1, 50, 513, 4096])
def test_a_stretch_of_any_kind(journal: Path, what: str, length: int) -> None:
    data = journal.read_bytes()
    starts = frame_starts(journal)
    for begin in (starts[20] - 3, starts[20], starts[20] + 1, starts[20] + 40):
        journal.write_bytes(SPOILED[what](data, begin, begin + length))
        found = read_recording(journal)
        back = frames_of(found)
        assert back == sorted(set(back)) and back[:20] == list(range(20))
        # Where bytes are cut out, the numbers of the records have to catch up with the room between them.
        behind = next(k for k in range(20, FRAMES) if k == FRAMES - 1 or starts[k] >= begin + length)
        assert back[-1] == FRAMES - 1 and len(back) >= 20 + FRAMES - behind - 1 - (
            5 if what == "cut out" else 0
        )
        lost = FRAMES - len(back)
        assert [loss[1:3] for loss in found.losses] == ([(lost * ROWS, lost)] if lost else [])
        assert found.ended and found.recovery is not None and found.recovery.damaged
        assert found.rows_behind == ROWS * sum(k >= 20 for k in back) or begin < starts[20]


def test_more_than_one(journal: Path) -> None:
    data = bytearray(journal.read_bytes())
    starts = frame_starts(journal)
    for k in (3, 30, 31, 55):
        data[starts[k] + 20] ^= 1
    journal.write_bytes(data)
    found = read_recording(journal)
    assert frames_of(found) == [k for k in range(FRAMES) if k not in (3, 30, 31, 55)]
    assert sum(loss[1] for loss in found.losses) == 4 * ROWS == sum(one.rows for one in found.unread)
    assert [one.records for one in found.unread] == [1, 1, 1, 1]


def test_a_session_says_so_inside(journal: Path) -> None:
    data = bytearray(journal.read_bytes())
    starts = frame_starts(journal)
    data[starts[30] + 20] ^= 1
    journal.write_bytes(data)
    seal(journal, journal.with_suffix(".h5"), keep_journal=True)
    with open_session(journal.with_suffix(".h5")) as session:
        told = session.recovered
        assert told is not None and told.ended and told.damaged and told.rows_behind == 29 * ROWS
        (one,) = told.unread
        assert (one.start_byte, one.records, one.rows, one.frames) == (starts[30], 1, ROWS, 1)
        assert (one.from_tick, one.to_tick) == (FIRST + 29 * ROWS * 1000, FIRST + 31 * ROWS * 1000)
        assert f"damaged record at byte {starts[30]}" in told.sentence
        assert session.losses == [(one.to_tick, ROWS, 1, 0)]
        assert session.results["final"] is None and told.results_left_out == 1
        (event,) = [event for event in session.events if event.kind == "unread"]
        assert event.tick == FIRST + (30 * ROWS - 1) * 1000 and event.data["records"] == 1


@pytest.mark.parametrize("ended", [True, False])
def test_only_what_was_not_whole_says_so(journal: Path, tmp_path: Path, ended: bool) -> None:
    write(tmp_path / "b.journal", 3, ended=ended)
    seal(tmp_path / "b.journal", tmp_path / "b.h5")
    with open_session(tmp_path / "b.h5") as session:
        assert (session.recovered is None) == ended
        if session.recovered is not None:
            assert session.recovered.sentence == "recovered from a journal: ended without an end record"
            assert session.recovered.harmless


def spread(path: Path, missing: range, period: int) -> list[int]:
    """A journal of slow rows, some frames damaged; ticks of all frames."""
    writer = JournalWriter(path, {**header(), "row_period_ticks": period})
    ticks = [7000 + ROWS * k * period for k in range(20)]
    for k, tick in enumerate(ticks):
        writer.frame(RowFrame(k, tick % 2**32, period, ROWS * k, 1, 0, frame(k).raw))
    writer.close()
    data = bytearray(path.read_bytes())
    starts = frame_starts(path)
    for k in missing:
        data[starts[k] + 15] ^= 1
    path.write_bytes(data)
    return ticks


@pytest.mark.parametrize("period", [1000, 2**28, 2**31, 2**32 - 5])
def test_ticks_go_on_whatever_turns_of_the_counter_fell_into_the_gap(tmp_path: Path, period: int) -> None:
    ticks = spread(tmp_path / "a.journal", range(5, 12), period)
    found = read_recording(tmp_path / "a.journal")
    assert found.tick[::ROWS].tolist() == ticks[:5] + ticks[12:]
    assert found.losses == [(ticks[12], 7 * ROWS, 7, 0)]


def test_without_a_row_before_the_events_tell_the_turn_of_the_counter(tmp_path: Path) -> None:
    writer = JournalWriter(tmp_path / "a.journal", header())
    turn = 3 * 2**32
    writer.event(Event(turn + 4000, "mark"))
    for k in range(4):
        writer.frame(RowFrame(k, 5000 + 5000 * k, 1000, ROWS * k, 1, 0, frame(k).raw))
    writer.close()
    data = bytearray((tmp_path / "a.journal").read_bytes())
    data[frame_starts(tmp_path / "a.journal")[0] + 15] ^= 1
    (tmp_path / "a.journal").write_bytes(data)
    found = read_recording(tmp_path / "a.journal")
    assert found.tick[::ROWS].tolist() == [turn + 10_000, turn + 15_000, turn + 20_000]
    assert found.losses == [] and [event.kind for event in found.events] == ["mark", "unread"]


@pytest.mark.parametrize(
    ("sequence", "tick", "first_row", "period"),
    [
        (25, 1, 25 * ROWS, 1000),  # another time
        (25, 0, 24 * ROWS, 1000),  # other rows
        (19, 0, 25 * ROWS, 1000),  # a frame that was before
        (90, 0, 25 * ROWS, 1000),  # more frames missing than rows
        (25, 0, 25 * ROWS, 999),
    ],
)
def test_rows_of_something_else_are_not_taken(
    tmp_path: Path, sequence: int, tick: int, first_row: int, period: int
) -> None:
    """Records whose check sums and numbers fit, as an old sector of another journal would leave them."""
    path = tmp_path / "a.journal"
    write(path, 20, ended=False)
    good = path.read_bytes()
    records = sum(1 for _ in Journal(path))
    made = frame(25)
    other = RowFrame(sequence, made.tick + tick, period, first_row, 1, 0, made.raw)
    strange = jn.encode(jn.EVENT, records + 2, b'{"tick":5,"kind":"mark","text":"strange"}')
    tail = strange + jn.encode(jn.FRAME, records + 3, other.pack())
    path.write_bytes(good + RANDOM.bytes(200) + tail)
    found = read_recording(path)
    assert frames_of(found) == list(range(20))
    assert not found.ended and found.losses == [] and "do not continue those before" in found.damage
    assert all(event.data.get("text") != "strange" for event in found.events)
    assert found.unread[0].start_byte == len(good) and found.recovery is not None and found.recovery.damaged
    # The very same, but for a frame that fits.
    path.write_bytes(good + RANDOM.bytes(200) + strange + jn.encode(jn.FRAME, records + 3, made.pack()))
    assert frames_of(read_recording(path)) == [*range(20), 25]


ENDS: dict[str, tuple[Any, bool, str]] = {
    "zeros behind complete rows": (lambda data, start: data[:start] + bytes(5000), True, "crash of the host"),
    "zeros inside a record": (
        lambda data, start: data[: start // 512 * 512] + bytes(5000),
        True,
        "crash of the host",
    ),
    "one zero": (lambda data, start: data[:start] + b"\0", True, "crash of the host"),
    "half a record": (lambda data, start: data[: start + 40], True, "cut off in a record at byte"),
    "noise": (lambda data, start: data[:start] + b"\x09" * 5000, False, "damaged record head at byte"),
    "noise and zeros": (
        lambda data, start: data[:start] + b"\x09" * 20 + bytes(5000),
        False,
        "damaged record head",
    ),
    "zeros and noise": (
        lambda data, start: data[:start] + bytes(5000) + b"\x09",
        False,
        "damaged record head",
    ),
}


@pytest.mark.parametrize("what", ENDS)
def test_what_a_crash_leaves_at_the_end_is_no_damage(journal: Path, what: str) -> None:
    act, harmless, words = ENDS[what]
    data, starts = journal.read_bytes(), frame_starts(journal)
    start = next(s for s in starts if s > 8192 and s % 512 > 100 and s % 512 < 400)
    journal.write_bytes(act(data, start))
    found = read_recording(journal)
    assert found.recovery is not None and found.recovery.harmless == harmless
    assert words in found.damage and not found.ended
    expected = starts.index(start)
    assert len(frames_of(found)) in (
        (expected,) if what != "zeros inside a record" else range(expected - 5, expected)
    )


@pytest.mark.parametrize(
    ("length", "words"), [(0, "cut off"), (5, "cut off"), (8, "cut off"), (50, "cut off in its header")]
)
def test_a_header_cut_off(journal: Path, length: int, words: str) -> None:
    journal.write_bytes(journal.read_bytes()[:length])
    with pytest.raises(Damaged, match=words):
        Journal(journal)


def test_the_pieces_a_search_reads_make_no_difference(journal: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    data, starts = bytearray(journal.read_bytes()), frame_starts(journal)
    data[starts[10] + 5 : starts[40]] = RANDOM.bytes(starts[40] - starts[10] - 5)
    journal.write_bytes(data)
    for size in (1, 13, 100, 1 << 20):
        monkeypatch.setattr(resumption, "READ_BYTES", size)
        assert frames_of(read_recording(journal)) == [*range(10), *range(40, FRAMES)]


def test_a_file_made_to_be_searched_for_ever_is_not(tmp_path: Path) -> None:
    """Heads at every place that all could be one, each of a record as long as the file allows."""
    path = tmp_path / "a.journal"
    writer = JournalWriter(path, header())
    writer.close(ended=False)
    heads = b"".join(jn.HEAD.pack(2, 1_000_000, 5 + k // 200) for k in range(400_000))
    path.write_bytes(path.read_bytes() + b"\x09" + heads)
    found = read_recording(path)
    assert len(found) == 0 and found.damage


@pytest.mark.parametrize(
    "text", ["[]", "{}", "3", '{"ended": true}', '{"ended": 1, "unread": [{}], "rows_behind": 0}']
)
def test_an_account_that_is_none(journal: Path, text: str) -> None:
    import h5py

    seal(journal, journal.with_suffix(".h5"))
    with h5py.File(journal.with_suffix(".h5"), "r+") as file:
        file[PLACE] = text
    with pytest.raises(Damaged, match="/recovered"):
        open_session(journal.with_suffix(".h5"))


def test_an_account_comes_back_as_it_was() -> None:
    from rig.record.recovery import Unread

    made = Recovery(
        False, (Unread("cut off", 5, 9, True), Unread("damaged", 1, 2, False, 3, 4, 1, 7, 8)), 5, 6
    )
    assert Recovery.from_json(made.to_json() | {"unread": list(made.to_json()["unread"])}) == made
