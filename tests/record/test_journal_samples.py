"""Rows of text samplers in a journal: exact numbers, and nothing taken for rows that is none."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from small_journal import ROWS, frame, header

from drivers.text_lines import TextReading, TextRow
from rig.record import journal as jn
from rig.record.journal import Journal, JournalWriter
from rig.record.samples import Samples
from rig.record.sealing import read_recording
from rig.record.tail import JournalTail

READING = TextReading([TextRow((0.1, -2.5e-7)), TextRow((1e22, 3.0))], 4)
TICKED = TextReading([TextRow((1.0,), 2**64 - 1), TextRow((2.0,), 0)], 0)


def test_samples_come_back_to_the_last_digit(tmp_path: Path) -> None:
    path = tmp_path / "a.journal"
    writer = JournalWriter(path, header())
    made = [
        Samples.of("strain", 2**40, READING),
        Samples.of("room", 5, TICKED),
        Samples.of("room", 6, TextReading()),
    ]
    for number, samples in enumerate(made):
        writer.frame(frame(number))
        writer.samples(samples)
    writer.close()
    records = [record for record in Journal(path) if record.kind == jn.SAMPLES]
    assert [Samples.from_json(record.fields()) for record in records] == made
    # As documented, read with the standard library alone.
    assert json.loads(records[0].payload) == {
        "sampler": "strain", "arrival_tick": 2**40, "rows": [[0.1, -2.5e-7], [1e22, 3.0]], "damaged": 4
    }  # fmt: skip
    assert json.loads(records[1].payload)["ticks"] == [2**64 - 1, 0]
    with JournalTail(path) as tail:
        assert [record for record in tail.poll() if record.kind == jn.SAMPLES] == records
    found = read_recording(path)
    assert found.ended and not found.damage and len(found.raw) == 3 * ROWS


def fields(**changes: Any) -> dict[str, Any]:
    whole: dict[str, Any] = {
        "sampler": "a",
        "arrival_tick": 1,
        "rows": [[1.0, 2]],
        "damaged": 0,
        "ticks": [3],
    }
    return {key: value for key, value in {**whole, **changes}.items() if value is not ...}


@pytest.mark.parametrize(
    "changes",
    [
        {"sampler": 3}, {"sampler": ...}, {"rows": ...}, {"rows": 3}, {"rows": [3]}, {"rows": [[1.0], [1.0, 2.0]]},
        {"rows": [["1"]]}, {"rows": [[None]]}, {"rows": [[True]]}, {"rows": [[float("nan")]]}, {"rows": [[10**400]]},
        {"rows": [[float("inf")]]}, {"arrival_tick": ...}, {"arrival_tick": -1}, {"arrival_tick": 2**64},
        {"arrival_tick": 1.5}, {"damaged": ...}, {"damaged": "0"}, {"damaged": True}, {"ticks": [1, 2]},
        {"ticks": ["1"]}, {"ticks": 3}, {"ticks": [2**64]},
    ],
)  # fmt: skip
def test_other_fields_are_no_samples(changes: dict[str, Any]) -> None:
    assert Samples.from_json(fields()).rows == ((1.0, 2.0),)
    with pytest.raises(ValueError, match=r"no rows|lengths|no number|is none|other rows"):
        Samples.from_json(fields(**changes))


@pytest.mark.parametrize("payload", [b"[1]", b"{", b"\xff", b'{"a": ' + b"9" * 5000 + b"}", b"[" * 10**5])
def test_payloads_that_are_no_fields(payload: bytes) -> None:
    """A right check sum does not make sense of nonsense: always ValueError, for readers to catch one thing."""
    with pytest.raises(ValueError, match=r"object|Expecting|decode|limit|deep"):
        jn.Record(jn.SAMPLES, 1, payload, 100).fields()
