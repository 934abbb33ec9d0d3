"""Numbers written to the precision of their uncertainty."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rig.report.rounding import (
    bare,
    decimals_for,
    fixed,
    half_width_text,
    interval_text,
    measured_text,
    rounded_uncertainty,
    value_text,
)
from rig.results import Measured

POSITIVE = st.floats(min_value=1e-9, max_value=1e9)


@pytest.mark.parametrize(
    ("exact", "kept"),
    [
        (10.47, "11"),  # JCGM 100:2008, 7.2.6: 10,47 mOhm may be rounded up to 11 mOhm
        (28.05, "28"),  # same place: 28,05 kHz should be rounded down to 28 kHz
        (0.027, "0.027"),  # same place: 27 mOhm with the estimate 10,057 62 Ohm
        (0.0996, "0.10"),
        (99.6, "1.0E+2"),
        (1.0, "1.0"),
        (0.00123, "0.0013"),
    ],
)
def test_uncertainty_keeps_two_digits(exact: float, kept: str) -> None:
    assert str(rounded_uncertainty(exact)) == kept


def test_estimate_ends_where_its_uncertainty_ends() -> None:
    # JCGM 100:2008, 7.2.6: 10,057 62 Ohm with 27 mOhm is written 10,058 Ohm.
    assert fixed(10.05762, decimals_for(0.027)) == "10.058"


@pytest.mark.parametrize("std", [0.0, -1.0, math.nan, math.inf])
def test_what_is_no_uncertainty_is_refused(std: float) -> None:
    with pytest.raises(ValueError, match="positive and finite"):
        rounded_uncertainty(std)


@given(POSITIVE)
def test_rounding_stays_within_five_percent_up_and_one_percent_down(std: float) -> None:
    kept = float(rounded_uncertainty(std))
    assert 0.99 * std <= kept <= 1.1 * std


@given(POSITIVE)
def test_two_digits_always(std: float) -> None:
    digits = rounded_uncertainty(std).as_tuple().digits
    assert len(digits) == 2


@given(st.floats(min_value=-1e6, max_value=1e6), POSITIVE)
def test_value_moves_less_than_half_a_last_digit(value: float, std: float) -> None:
    text = value_text(Measured(value, std)).replace("−", "-")
    assert abs(float(text) - value) <= 0.5 * 10.0 ** -decimals_for(std) * (1 + 1e-9) + 1e-12 * abs(value)


@pytest.mark.parametrize(
    ("measured", "phrase"),
    [
        (Measured(25.8823, 0.0236, 25.8361, 25.9286), "25.882 Hz (25.836 to 25.929)"),
        (Measured(), "not known"),
        (Measured(math.nan, math.nan, math.nan, math.nan), "not known"),
        (Measured(3.0, None, None, None), "3 Hz (interval not known)"),
        (Measured(3.0, 0.1, 2.8, None), "3.00 Hz (above 2.80)"),
        (Measured(3.0, 0.1, None, 3.2), "3.00 Hz (below 3.20)"),
        (Measured(None, None, 4.0, 5.0), "4.00 to 5.00 Hz"),
        (Measured(-0.004, 0.02, -0.044, 0.036), "−0.004 Hz (−0.044 to 0.036)"),
        (Measured(-0.0004, 0.02, -0.0396, 0.0388), "0.000 Hz (−0.040 to 0.039)"),
        (Measured(1234.5, 210.0, 823.0, 1646.0), "1230 Hz (820 to 1650)"),
        (Measured(2.0, 0.3, -math.inf, 2.6), "2.00 Hz (below 2.60)"),
    ],
)
def test_phrases(measured: Measured, phrase: str) -> None:
    assert measured_text(measured, "Hz") == phrase


def test_interval_alone_implies_the_precision() -> None:
    assert value_text(Measured(7.12345, None, 7.1, 7.15)) == "7.123"


def test_half_width_only_where_both_sides_agree() -> None:
    assert half_width_text(Measured.normal(1.5, 0.1)) == "±0.20"
    assert half_width_text(Measured(1.5, 0.1, 1.4, 1.9)) == interval_text(Measured(1.5, 0.1, 1.4, 1.9))
    assert half_width_text(Measured()) == ""
    # Nearly symmetric: the wider side is told, so the half-width never claims more than the interval.
    assert half_width_text(Measured(0.8623, 0.0044, 0.8537, 0.8710)) == "±0.0087"


def test_a_column_caps_decimals_without_losing_the_uncertainty() -> None:
    fine = Measured.normal(7.5000491, 0.000012)
    assert value_text(fine, 4) == "7.5000"
    assert half_width_text(fine, 4) == "±0.0001"
    assert value_text(fine) == "7.500049"


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (None, "not known"),
        (math.nan, "not known"),
        (0.0, "0"),
        (12.0, "12"),
        (0.00714, "0.00714"),
        (1.5416e-4, "0.0001542"),
        (2.5e-9, "2.5e−9"),
        (8192.0, "8192"),
        (-31.25, "−31.25"),
    ],
)
def test_numbers_without_uncertainty(value: float | None, text: str) -> None:
    assert bare(value) == text
