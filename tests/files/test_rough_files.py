"""Files nobody means to write: too deep, too long, endless, of the other kind. A sentence, never an exception."""

from __future__ import annotations

from pathlib import Path

import pytest

from rig.files.lines import parse, read_text
from rig.files.protocol import protocol_from_text
from rig.files.rig import rig_from_text
from rig.problem import FileProblems
from rig.shipped import find

BOOM = find("boom").read_text(encoding="utf-8")
SWEEP = find("first-sweep").read_text(encoding="utf-8")


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (BOOM + "\nx = " + "[" * 5000 + "]" * 5000, "nested"),
        (BOOM + "\nx = " + "[" * 60 + "]" * 60, "nested at most"),
        (BOOM.replace("frame_rows = 20", "frame_rows = " + "9" * 5000), "fewer digits"),
        (BOOM.replace("frame_rows = 20", "frame_rows = " + "9" * 400), "a whole number"),
        (BOOM.replace('name = "boom"', 'name = "../boom"'), "a name of letters"),
        (BOOM.replace("frame_rows = 20", "frame_rows = 200"), "at most half of limits.stale"),
        (BOOM.replace('title = "', 'titel = "\\u001b[2J'), "did you mean title"),
        (SWEEP, "a rig file; this is a protocol"),
    ],
    ids=[
        "deep",
        "rather deep",
        "endless number",
        "long number",
        "path",
        "slow frames",
        "escape",
        "other kind",
    ],
)
def test_rough_rig(text: str, words: str) -> None:
    with pytest.raises(FileProblems) as caught:
        rig_from_text(text, "rig.toml")
    told = [str(problem) for problem in caught.value.problems]
    assert any(words in line for line in told), told
    assert all(line.isprintable() for line in told)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (BOOM, "a protocol file; this is a rig file"),
        (SWEEP.replace('"5 V", "6 V"', '"6 V", "5 V"'), "levels that rise"),
        (SWEEP.replace('"11 V", "10 V"', '"110 V", "10 V"'), "limits shock risk only"),
        (SWEEP.replace('settle = "2 s"', 'settle = "2 s"\nslew = "1e-9 V/s"'), "a voltage per time"),
        (SWEEP.replace('for = "1 s"', 'for = "600 s"') + "\n" + '[[step]]\ndo = "repeat"\ntimes = 1000\n'
         '[[step.step]]\ndo = "hold"\nfor = "3600 s"\n', "at most 7 days"),
    ],
    ids=["other kind", "not rising", "over 60 V", "endless ramp", "endless repeat"],
)  # fmt: skip
def test_rough_protocol(text: str, words: str) -> None:
    with pytest.raises(FileProblems) as caught:
        protocol_from_text(text, "protocol.toml")
    assert any(words in str(problem) for problem in caught.value.problems), str(caught.value)


def test_a_device_is_no_file(tmp_path: Path) -> None:
    """Its size is told as 0 and it never ends."""
    with pytest.raises(FileProblems, match="below 1 MiB"):
        read_text("/dev/zero")
    with pytest.raises(FileProblems):
        read_text(tmp_path)


def test_a_key_of_very_many_parts_is_told_at_once() -> None:
    """The library takes minutes over it."""
    text = "haltere_rig = 1\n" + ".".join(["a"] * 200_000) + " = 1\n"
    with pytest.raises(FileProblems) as told:
        parse(text, "deep.toml")
    assert str(told.value) == "deep.toml:2: expected tables nested at most 32 deep"
