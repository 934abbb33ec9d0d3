"""Text lines: what is a row, what is damage, and that no bytes do more than that."""

from __future__ import annotations

import math
import os
import re
import struct

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.errors import LinkError
from drivers.ports import open_wire
from drivers.text_lines import (
    DELIMITERS,
    LONGEST_LINE,
    TextColumn,
    TextLines,
    TextReading,
    TextRow,
    TextSampler,
    TextSource,
)


def read(data: bytes, columns: int = 2, **options: object) -> tuple[list[tuple[float, ...]], int]:
    """Values of the lines after a first one that is cut, and the number of damaged ones."""
    lines = TextLines(columns, **options)  # type: ignore[arg-type]
    rows = lines.feed(b"ut\n" + data)
    return [row.values for row in rows], lines.damaged


@pytest.mark.parametrize(
    ("line", "values"),
    [
        (b"1,2", (1.0, 2.0)),
        (b"-1.5,+2.25", (-1.5, 2.25)),
        (b" 1 ,\t2 ", (1.0, 2.0)),
        (b".5,5.", (0.5, 5.0)),
        (b"1e3,1.5E-2", (1000.0, 0.015)),
        (b"0000,-0", (0.0, 0.0)),
        (b"16777217,0.1", (16777217.0, 0.1)),
        (b"1" * 200 + b"," + b"2" * 200, (float("1" * 200), float("2" * 200))),
    ],
)
def test_lines_that_are_rows(line: bytes, values: tuple[float, ...]) -> None:
    assert read(line + b"\n") == ([values], 0)


@pytest.mark.parametrize(
    "line",
    [
        b"1", b"1,2,3", b",", b"1,", b",2", b"1;2", b"1 2", b"1,,2",
        b"nan,1", b"1,inf", b"-inf,1", b"1,NaN", b"infinity,1",
        b"7,5,1", b"1,0x10", b"1,1_000", b"1,1e", b"1,e5", b"1,1e400", b"1,.", b"1,+", b"1,--1", b"1,1-1",
        b"1,1 0", b"1,1e+", b"1,1e123", b"1,'2'", b'1,"2"', b"1,2V", b"force,temperature", b"# 1,2",
        b"1,2\x00", b"\xff1,2", b"1,\xc2\xb2", b"1,2\x1b[31m", b"1,\xd9\xa3", b"\x0b1,2", b"1,True",
        b"1," + b"9" * 400, b"1," + b"0" * LONGEST_LINE,
    ],
)  # fmt: skip
def test_lines_that_are_damaged(line: bytes) -> None:
    """Each is counted once, and the lines around it come out."""
    assert read(b"1,2\n" + line + b"\n3,4\n") == ([(1.0, 2.0), (3.0, 4.0)], 1)


@pytest.mark.parametrize("end", [b"\n", b"\r", b"\r\n", b"\n\r", b"\n\n \n\t\r"])
def test_line_ends(end: bytes) -> None:
    data = end.join([b"1,2", b"3,4", b"5,6", b""])
    expected = [(1.0, 2.0), (3.0, 4.0), (5.0, 6.0)]
    assert read(data) == (expected, 0)
    lines = TextLines(2)
    rows = [row.values for place in range(len(data)) for row in lines.feed(data[place : place + 1])]
    assert rows == expected[1:] and lines.damaged == 0  # the first line is not known to be whole


@pytest.mark.parametrize(("name", "mark"), DELIMITERS.items())
def test_delimiters(name: str, mark: bytes) -> None:
    assert read(mark.join([b"1", b"-2.5", b"3"]) + b"\n", 3, delimiter=name) == ([(1.0, -2.5, 3.0)], 0)
    wrong = b"|".join([b"1", b"-2.5", b"3"])
    assert read(wrong + b"\n", 3, delimiter=name) == ([], 1)


def test_padded_columns_are_delimited_by_runs_of_spaces() -> None:
    assert read(b"   1.0   -2.5\n  10.0  3  \n", 2, delimiter="space") == ([(1.0, -2.5), (10.0, 3.0)], 0)
    assert read(b"1\t2\n", 2, delimiter="space") == ([], 1)
    assert read(b"1 \t 2\n", 2, delimiter="tab") == ([(1.0, 2.0)], 0)


def test_the_first_line_may_be_cut() -> None:
    """Half a number looks like a number: "23.5,1" may have been "123.5,1"."""
    lines = TextLines(2)
    assert lines.feed(b"23.5,1\n2,3\n") == [TextRow((2.0, 3.0))]
    assert lines.damaged == 0
    garbage = TextLines(2)
    assert garbage.feed(b"\xfe\xfe\xfe\n2,3\n") == [TextRow((2.0, 3.0))] and garbage.damaged == 0
    endless = TextLines(2)
    assert endless.feed(b"7" * 5000) == [] and endless.damaged == 1  # that is no line, cut or not
    assert endless.feed(b"\n2,3\n") == [TextRow((2.0, 3.0))] and endless.damaged == 1


def test_partial_lines_wait_for_their_end() -> None:
    lines = TextLines(2)
    lines.feed(b"\n")
    assert lines.feed(b"1,") == [] and lines.feed(b"25") == []
    assert lines.feed(b"\n3,4") == [TextRow((1.0, 25.0))]
    assert lines.feed(b"\r\n") == [TextRow((3.0, 4.0))]
    assert lines.damaged == 0


def test_the_longest_line() -> None:
    line = b"1," + b"0" * (LONGEST_LINE - 3) + b"2"
    assert len(line) == LONGEST_LINE
    assert read(line + b"\n") == ([(1.0, 2.0)], 0)
    assert read(b"0" + line + b"\n") == ([], 1)


def test_a_line_without_end_takes_no_memory() -> None:
    lines = TextLines(2)
    lines.feed(b"\n")
    for _ in range(1000):
        assert lines.feed(b"1,2" * 1000) == []
        assert len(lines._rest) <= LONGEST_LINE
    assert lines.damaged == 1
    assert lines.feed(b"\n1,2\n") == [TextRow((1.0, 2.0))] and lines.damaged == 1


@pytest.mark.parametrize("place", [0, 1, 2])
def test_ticks_of_the_device(place: int) -> None:
    lines = TextLines(2, tick_column=place)
    lines.feed(b"\n")

    def line(tick: bytes) -> bytes:
        fields = [b"1.5", b"2.5"]
        fields.insert(place, tick)
        return b",".join(fields) + b"\n"

    assert lines.feed(line(b"4294967295")) == [TextRow((1.5, 2.5), 4294967295)]
    assert lines.feed(line(b"18446744073709551615")) == [TextRow((1.5, 2.5), 2**64 - 1)]
    for wrong in (b"18446744073709551616", b"-1", b"1.0", b"1e3", b"+1", b"", b"0x1", b"9" * 100):
        before = lines.damaged
        assert lines.feed(line(wrong)) == [] and lines.damaged == before + 1


def test_impossible_lines_are_our_own_mistake() -> None:
    for words in ((0,), (2, "pipe"), (2, "comma", 3), (2, "comma", -1)):
        with pytest.raises(ValueError, match="no "):
            TextLines(*words)  # type: ignore[arg-type]


pieces = st.lists(
    st.one_of(
        st.binary(max_size=30),
        st.sampled_from(
            [b"1,2\n", b"3.5,-4e2\r\n", b"nan,1\n", b"\r", b"\n", b",", b"1" * 300, b" \n", b"7,5\r"]
        ),
    ),
    max_size=40,
)


@settings(max_examples=300, deadline=None)
@given(pieces, st.integers(1, 3), st.sampled_from([None, 0, 1]), st.sampled_from(list(DELIMITERS)))
def test_no_bytes_raise_and_their_cut_makes_no_difference(
    parts: list[bytes], columns: int, tick_column: int | None, delimiter: str
) -> None:
    data = b"".join(parts)
    whole = TextLines(columns, delimiter, tick_column)
    rows = whole.feed(data)
    for cut in (parts, [data[k : k + 1] for k in range(len(data))]):
        lines = TextLines(columns, delimiter, tick_column)
        assert [row for part in cut for row in lines.feed(part)] == rows
        assert lines.damaged == whole.damaged
    for row in rows:
        assert len(row.values) == columns and all(math.isfinite(value) for value in row.values)
        assert (row.tick is None) == (tick_column is None)
    ends = data.count(b"\n") + data.count(b"\r")
    assert len(rows) + whole.damaged <= ends + 1


@settings(max_examples=200, deadline=None)
@given(
    st.lists(
        st.tuples(st.floats(allow_nan=False, allow_infinity=False), st.integers(0, 2**64 - 1)), max_size=20
    )
)
def test_what_a_device_prints_comes_out_exactly(printed: list[tuple[float, int]]) -> None:
    """Printed with 17 digits a double is read back as the same double (IEEE 754, 5.12.2; value from memory)."""
    data = b"\n".join(f"{tick};{value:.17g}".encode() for value, tick in printed)
    lines = TextLines(1, "semicolon", 0)
    rows = lines.feed(b"\n" + data + b"\n")
    small = [(value, tick) for value, tick in printed if not re.search(r"e[+-]\d{3}$", f"{value:.17g}")]
    bits = [struct.pack("<d", row.values[0]) for row in rows]
    assert bits == [struct.pack("<d", value) for value, _ in small]
    assert [row.tick for row in rows] == [tick for _, tick in small]
    assert lines.damaged == len(printed) - len(small)  # exponents of three digits are no measured number


class Fake:
    """A port that brings what it is given, then goes away."""

    def __init__(self, *parts: bytes) -> None:
        self.parts = list(parts)
        self.closed = False

    def read(self, max_wait_s: float) -> bytes:
        if not self.parts:
            raise LinkError("the line is down")
        return self.parts.pop(0)

    def close(self) -> None:
        self.closed = True


STRAIN = TextSampler(
    name="strain",
    port="/dev/ttyUSB1",
    columns=(
        TextColumn("force", "vertical load", "N", 1e-3, -0.2),
        TextColumn("plate", "temperature", "degC"),
    ),
    tick_column=0,
    tick_hz=1e6,
)


def test_a_source_reads_its_port() -> None:
    wire = Fake(b"4,5\n1,1", b"000,21.5\n", b"", b"2,oops,3\r\n3,0,22\n")
    source = TextSource(STRAIN, wire)
    assert source.read() == TextReading([], 0)
    assert source.read() == TextReading([TextRow((1000.0, 21.5), 1)], 0)
    assert source.read() == TextReading([], 0)
    assert source.read() == TextReading([TextRow((0.0, 22.0), 3)], 1)
    assert source.damaged == 1
    with pytest.raises(LinkError):
        source.read()
    source.close()
    assert wire.closed
    force = STRAIN.columns[0].values(np.array([1000.0, 0.0]))
    np.testing.assert_allclose(force, [0.8, -0.2])


def test_a_real_port() -> None:
    """A pseudo-terminal as the port: what a device prints goes through the kernel's line and ours."""
    master, slave = os.openpty()
    try:
        source = TextSource(STRAIN, open_wire(os.ttyname(slave), 115_200))
        os.write(master, b"9,9\r\n" + b"".join(b"%d,%d,20.5\r\n" % (k, 10 * k) for k in range(100)))
        rows: list[TextRow] = []
        for _ in range(200):
            rows += source.read(0.1).rows
            if len(rows) == 100:
                break
        assert rows == [TextRow((10.0 * k, 20.5), k) for k in range(100)]
        assert source.damaged == 0
        source.close()
    finally:
        os.close(master)
        os.close(slave)


def test_limits_are_told() -> None:
    plain = TextSampler("strain", "COM3", STRAIN.columns)
    for sampler, words in ((plain, "arrival at the host"), (STRAIN, "its own ticks of 1000000 Hz")):
        told = "; ".join(sampler.limits)
        assert words in told and "check sum" in told and "never used by interlocks" in told
