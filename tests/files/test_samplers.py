"""Samplers of text lines in rig files: what is read, what is shared with nobody, and what is told about them."""

from __future__ import annotations

import math
import re
from pathlib import Path

import numpy as np
import pytest

from drivers.text_lines import TextColumn, TextLines
from rig.command.check import main as check
from rig.command.exits import Exit
from rig.command.parser import build
from rig.files.rig import rig_from_text
from rig.problem import FileProblems
from rig.shipped import find

BOOM = find("boom").read_text(encoding="utf-8")
STRAIN = """
[sampler.strain]
port = "/dev/ttyUSB1"
baud = 57600
delimiter = "semicolon"
tick_rate = "1 MHz"
[sampler.strain.column.force]
measures = "vertical load"
per_count = "2 mN"
zero = "0.2 N"
polarity = -1
[sampler.strain.column.clock]
measures = "tick"
[sampler.strain.column.arm]
measures = "body angle"
counts_per_turn = 4096
[sampler.strain.column.lever]
measures = "body angle"
per_count = "0.1 deg"
[sampler.strain.column.valve]
measures = "other"
per_count = 0.5
zero = 3
"""
ROOM = """
[sampler.room]
port = "COM7"
delimiter = "tab"
column.air = { measures = "temperature", per_count = "1 degC" }
column.wall = { measures = "temperature", per_count = "0.01 degC", zero = "273.15 degC" }
"""


def test_a_rig_without_samplers_has_none() -> None:
    assert rig_from_text(BOOM, "rig.toml").samplers == ()


def test_samplers_are_read_in_the_order_of_the_file() -> None:
    strain, room = rig_from_text(BOOM + STRAIN + ROOM, "rig.toml").samplers
    assert (strain.name, strain.port, strain.baud, strain.delimiter) == (
        "strain",
        "/dev/ttyUSB1",
        57600,
        "semicolon",
    )
    assert (strain.tick_column, strain.tick_hz) == (1, 1e6)
    assert strain.columns == (
        TextColumn("force", "vertical load", "N", -2e-3, -0.2),
        TextColumn("arm", "body angle", "rad", 2.0 * math.pi / 4096),
        TextColumn("lever", "body angle", "rad", pytest.approx(math.radians(0.1))),  # type: ignore[arg-type]
        TextColumn("valve", "other", "1", 0.5, -3.0),
    )
    assert (room.baud, room.tick_column, room.tick_hz) == (115_200, None, 0.0)
    assert [column.unit for column in room.columns] == ["degC", "degC"]


def test_a_line_becomes_values_in_si_units() -> None:
    """By hand: -(100 x 2 mN) - 0.2 N = -0.4 N; a quarter turn; 50 x 0.1 deg; 8 x 0.5 - 3."""
    (strain,) = rig_from_text(BOOM + STRAIN, "rig.toml").samplers
    lines = TextLines(len(strain.columns), strain.delimiter, strain.tick_column)
    (row,) = lines.feed(b"\n100;777;1024;50;8\r\n")
    assert row.tick == 777
    values = [
        float(column.values(np.array([number]))[0])
        for column, number in zip(strain.columns, row.values, strict=True)
    ]
    np.testing.assert_allclose(values, [-0.4, math.pi / 2, math.radians(5.0), 1.0])


@pytest.mark.parametrize(
    ("text", "key", "words"),
    [
        (STRAIN + ROOM.replace("COM7", "/dev/ttyUSB1"), "sampler.room.port", "a port of its own; sampler strain"),
        (STRAIN.replace("sampler.strain", "sampler.board"), "sampler.board", "not board"),
        (STRAIN.replace("sampler.strain", "sampler.2nd"), "sampler.2nd", "a sampler name"),
        ('sampler.room = 3\n', "sampler.room", "a table"),
        ('[sampler.room]\nport = "x"\ndelimiter = "tab"\n', "sampler.room.column", "one to 64 tables"),
        ('[sampler.room]\nport = "x"\ndelimiter = "tab"\ncolumn = 3\n', "sampler.room.column", "a table"),
        (
            '[sampler.room]\nport = "x"\ndelimiter = "tab"\ntick_rate = "1 kHz"\n'
            'column.t = { measures = "tick" }\n',
            "sampler.room.column",
            "a column beside the ticks",
        ),
    ],
)  # fmt: skip
def test_mistakes_beyond_one_key(text: str, key: str, words: str) -> None:
    whole = text + BOOM if text.startswith("sampler") else BOOM + text
    with pytest.raises(FileProblems) as caught:
        rig_from_text(whole, "rig.toml")
    assert [problem for problem in caught.value.problems if problem.key == key and words in problem.expected]


def test_the_port_of_the_board_is_taken() -> None:
    text = BOOM.replace('driver = "simulated"', 'driver = "board"\nport = "COM7"') + ROOM
    with pytest.raises(FileProblems, match="a port of its own; the board is there"):
        rig_from_text(text, "rig.toml")


def test_check_tells_what_text_lines_are_not_good_for(
    tmp_path_factory: pytest.TempPathFactory, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path_factory.mktemp("rig") / "rig.toml"
    path.write_text(BOOM + STRAIN + ROOM, encoding="utf-8")
    assert check(build().parse_args(["check", str(path)])) is Exit.DONE
    told = capsys.readouterr().out
    strain, room = told.index("sampler strain"), told.index("sampler room")
    assert "own ticks of 1000000 Hz" in told[strain:room] and "arrival at the host" in told[room:]
    for part in (told[strain:room], told[room:]):
        assert "no check sum: a flipped digit goes unseen" in part
        assert "never used by interlocks or for decay" in part
    assert "force (vertical load, N)" in told and "57600 baud, semicolon" in told


def test_the_example_of_the_readme_is_read() -> None:
    text = (Path(__file__).parents[2] / "README.md").read_text(encoding="utf-8")
    (example,) = re.findall(r"```toml\n(\[sampler.*?)```", text, re.DOTALL)
    (strain,) = rig_from_text(BOOM + "\n" + example, "rig.toml").samplers
    assert (strain.tick_column, [column.name for column in strain.columns]) == (0, ["force"])
