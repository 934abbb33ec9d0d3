"""Quantities against a general unit library, and what they refuse."""

from __future__ import annotations

import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rig.files.lines import parse as parse_toml
from rig.files.protocol import protocol_from_text
from rig.files.quantity import KINDS, NotAQuantity, parse, parse_uncertain
from rig.files.rig import rig_from_text
from rig.problem import FileProblems

# Our spelling of units -> pint's. SI base unit of a kind as pint names it is found by pint itself.
PINT = {
    "rtHz": "Hz^0.5",
    "rts": "s^0.5",
    "degC": "kelvin",  # only differences are compared
    "1/s": "1/s",
    "%": "percent",
    "µ": "u",
}


def in_pint(unit: str) -> str:
    for ours, theirs in PINT.items():
        unit = unit.replace(ours, theirs)
    return unit.replace(" m/", "*m/").replace(" ", "*")


@pytest.mark.parametrize(
    ("kind", "unit"),
    [(kind, unit) for kind, (_, _, units) in KINDS.items() for unit in units if unit != "ppm"],
)
def test_every_unit_has_the_factor_pint_gives_it(kind: str, unit: str) -> None:
    """Source: pint's own unit definitions (a general-purpose library)."""
    registry = pint.UnitRegistry()
    expected = registry.Quantity(1.0, in_pint(unit)).to_base_units().magnitude
    if unit in ("g cm^2", "g mm^2", "g", "mg"):
        expected = registry.Quantity(1.0, in_pint(unit)).to(in_pint(next(iter(KINDS[kind][2])))).magnitude
    if unit in ("B", "kB", "MB", "GB"):
        expected = registry.Quantity(1.0, unit).to("B").magnitude
    assert parse(f"1 {unit}", kind) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize(
    "text",
    ["7,5 V", "nan V", "inf V", "9**9 V", "1_000 V", "7.5", "V", "", "7.5 V V", "7.5 v", "٣ V", "0x10 V", "7.5\nV",
     "7 .5 V", "1e999 V", "--1 V", "1 V/s", "7.5 mA", "1500 rpm", "[1] V", "1+1 V"],
)  # fmt: skip
def test_what_is_no_voltage(text: str) -> None:
    with pytest.raises(NotAQuantity):
        parse(text, "voltage")


def test_numbers_as_people_write_them() -> None:
    assert [
        parse(text, "voltage") for text in ("7.5 V", "7.5V", "+7.5 V", ".5 V", "5. V", "1e1 V", "  2 V ")
    ] == [
        7.5,
        7.5,
        7.5,
        0.5,
        5.0,
        10.0,
        2.0,
    ]
    found = parse_uncertain("72.0 g +- 0.1 g", "mass")
    assert (found.value, found.std) == pytest.approx((0.072, 1e-4))


@given(st.text(max_size=200))
def test_any_text_is_a_quantity_or_told_as_none(text: str) -> None:
    """Whatever is typed, the answer is a finite number or one sentence."""
    for kind in ("voltage", "angle", "impulse"):
        try:
            value = parse(text, kind)
        except NotAQuantity as error:
            assert "\n" not in str(error)
        else:
            assert abs(value) < 1e300


@given(st.text(max_size=300))
def test_any_text_is_a_file_or_its_problems(text: str) -> None:
    """Any text gives a description or problems, never another exception."""
    for read in (rig_from_text, protocol_from_text):
        with pytest.raises(FileProblems) as caught:
            read(text, "file.toml")
        assert all("\n" not in str(problem) for problem in caught.value.problems)


def test_lines_of_keys_everywhere() -> None:
    text = (
        'a = 1\n[t]\n"q.k" = """\nx = 2\n"""\nd.e = [\n  1, # ]\n  2,\n]\n[[r]]\nk = 1\n[[r]]\n'
        "k = '''\n[x]\n'''\nlast = {a = 1}\n[r.s]\nz = 1\n"
    )
    document = parse_toml(text, "f")
    assert document.line(("a",)) == 1
    assert document.line(("t", "q.k")) == 3
    assert document.line(("t", "d", "e")) == 6
    assert document.line(("r", 0, "k")) == 11
    assert document.line(("r", 1, "k")) == 13
    assert document.line(("r", 1, "last")) == 16
    assert document.line(("r", 1, "s", "z")) == 18
