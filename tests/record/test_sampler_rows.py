"""Rows of text samplers from journal to session: every number as it stood in the line."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import asdict
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from small_journal import frame, header

from drivers.text_lines import TextColumn, TextReading, TextRow, TextSampler
from rig.record.amendment import write_results
from rig.record.digests import problems
from rig.record.errors import Damaged
from rig.record.journal import JournalWriter
from rig.record.samples import Samples
from rig.record.sealing import read_recording, seal
from rig.session import open_session

FIRST = 0xFFFFE000  # the first tick of the small journal
STRAIN = TextSampler(
    "strain",
    "/dev/none",
    (TextColumn("force", "vertical load", "N", 1e-3, 0.2), TextColumn("valve", "other", "1")),
    tick_column=0,
    tick_hz=1e6,
)
PARTS = [
    Samples.of(
        "strain", FIRST + 500, TextReading([TextRow((0.1, 1.0), 2**63), TextRow((-2.5e-7, 0.0), 7)], 2)
    ),
    Samples.of("room", FIRST - 600, TextReading([TextRow((21.5,))])),
    Samples.of("strain", FIRST + 700, TextReading((), 1)),
    Samples.of("strain", FIRST + 900, TextReading([TextRow((1e22, 1.0), 8)])),
    Samples.of("dumb", FIRST + 950, TextReading((), 5)),
]


def journal(path: Path, described: Any = None, parts: list[Samples] = PARTS) -> Path:
    writer = JournalWriter(path, {**header(), "samplers": described})
    for number, samples in enumerate(parts):
        writer.frame(frame(number))
        writer.samples(samples)
    writer.close()
    return path


@pytest.fixture
def session(tmp_path: Path) -> Path:
    seal(journal(tmp_path / "a.journal", [asdict(STRAIN)]), tmp_path / "a.h5")
    return tmp_path / "a.h5"


def test_with_h5py_alone(session: Path) -> None:
    with h5py.File(session) as file:
        strain = file["samplers/strain"]
        assert strain.attrs["damaged_lines"] == 3 and strain.attrs["tick_hz"] == 1e6
        assert (strain["arrival_tick"][:] - FIRST).tolist() == [500, 500, 900]
        np.testing.assert_allclose(strain["time_s"][:], [500e-6, 500e-6, 900e-6])
        assert strain["device_tick"][:].tolist() == [2**63, 7, 8]
        assert strain["force"][:].tolist() == [0.1, -2.5e-7, 1e22]
        assert strain["force"].attrs["unit"] == "N" and strain["force"].attrs["scale"] == 1e-3
        assert strain["valve"][:].tolist() == [1.0, 0.0, 1.0]
        # Nobody described this one, and it came before the board's rows; the last never said a number.
        assert (
            file["samplers/room/column0"][:].tolist() == [21.5] and "device_tick" not in file["samplers/room"]
        )
        np.testing.assert_allclose(file["samplers/room/time_s"][:], [-600e-6])
        assert file["samplers/dumb"].attrs["damaged_lines"] == 5
        assert file["samplers/dumb/arrival_tick"].shape == (0,)
    assert problems(session) == []


def test_as_a_session_and_after_an_amendment(session: Path) -> None:
    for _ in range(2):
        with open_session(session) as opened:
            strain = opened.samplers["strain"]
            assert strain.columns == ("force", "valve") and strain.unit("force") == "N"
            np.testing.assert_array_equal(strain["force"], np.array([0.1, -2.5e-7, 1e22]) * 1e-3 + 0.2)
            assert opened.samplers["dumb"].columns == () and len(opened.samplers["dumb"].time_s) == 0
        write_results(session, {"levels": []})
    assert problems(session) == []


@pytest.mark.parametrize(
    "described",
    [
        3, [3], [{"name": "strain"}], [{"name": "strain", "columns": [1, 2]}], [{"name": "strain", "columns": 3}],
        [{"name": "strain", "columns": [{"name": "one"}]}],  # of two
        [{"name": "strain", "columns": [{"name": "one"}, {"name": "one"}]}],
        [{"name": "strain", "columns": [{"name": "time_s"}, {"name": "two"}]}],
        [{"name": "strain", "columns": [{"name": "../rig"}, {"name": "two"}], "tick_hz": "x", "limits": 3}],
    ],
)  # fmt: skip
def test_descriptions_that_do_not_fit_are_left_aside(tmp_path: Path, described: Any) -> None:
    seal(journal(tmp_path / "a.journal", described), tmp_path / "a.h5")
    with open_session(tmp_path / "a.h5") as opened:
        assert opened.samplers["strain"].columns == ("column0", "column1")
        assert opened.samplers["strain"]["column1"].tolist() == [1.0, 0.0, 1.0]


@pytest.mark.parametrize(
    "wrong",
    [
        Samples.of("strain", 1000, TextReading([TextRow((1.0,), 3)])),
        Samples.of("strain", 1000, TextReading([TextRow((1.0, 2.0))])),
        Samples.of("../x", 1000, TextReading([TextRow((1.0, 2.0))])),
    ],
)
def test_samples_that_do_not_belong_end_the_recording(tmp_path: Path, wrong: Samples) -> None:
    found = read_recording(journal(tmp_path / "a.journal", parts=[*PARTS, wrong, PARTS[0]]))
    assert "sampler that are none" in found.damage and "record" in found.damage
    assert len(found.samplers["strain"].rows) == 3


CRAFTED: dict[str, tuple[Callable[[h5py.File], Any], str]] = {
    "no times": (lambda file: file.pop("samplers/strain/time_s"), "no times"),
    "texts": (lambda file: file.create_dataset("samplers/strain/more", data=["a"]), "expected f8"),
    "too long": (lambda file: file.create_dataset("samplers/room/more", data=[1.0, 2.0]), "different length"),
    "no group": (lambda file: file.create_dataset("samplers/more", data=3.0), "not of its kind"),
}


@pytest.mark.parametrize("what", CRAFTED)
def test_crafted_samplers_are_refused_in_a_sentence(session: Path, what: str) -> None:
    act, words = CRAFTED[what]
    with h5py.File(session, "r+") as file:
        act(file)
    with pytest.raises(Damaged, match=words) as caught:
        open_session(session)
    assert "\n" not in str(caught.value) and str(session) in str(caught.value)


def test_damage_inside_a_column_is_told_when_it_is_read(session: Path) -> None:
    with h5py.File(session) as file:
        chunk = file["samplers/strain/force"].id.get_chunk_info(0)
    data = bytearray(session.read_bytes())
    data[chunk.byte_offset + chunk.size - 1] ^= 0x10
    session.write_bytes(data)
    with (
        open_session(session) as opened,
        pytest.raises(Damaged, match="/samplers/strain/force cannot be read"),
    ):
        _ = opened.samplers["strain"]["force"]
    assert problems(session) == ["/samplers/strain/force cannot be read"]
