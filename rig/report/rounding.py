"""Numbers written to the precision their uncertainty supports (JCGM 100:2008, 7.2.6).

The standard uncertainty keeps two significant digits, the value ends at the same decimal place.
"""

from __future__ import annotations

import math
from decimal import ROUND_HALF_EVEN, ROUND_UP, Decimal

from rig.results import Measured

NOT_KNOWN = "not known"
NORMAL_95 = 1.959964
#: Rounding up is the rule, but not where rounding to nearest understates by less than this.
SLIGHT = Decimal("0.01")
#: Digits of a number that comes without any uncertainty.
BARE_DIGITS = 4
UNLIMITED = 99
#: Sides of an interval that differ by less than this share are told as one half-width.
NEARLY = 0.1


def rounded_uncertainty(std: float) -> Decimal:
    """A positive standard uncertainty with two significant digits, rounded up unless that is excessive.

    The two examples of the clause: 10.47 becomes 11, 28.05 becomes 28.
    Raises ValueError for a number that is not positive and finite.
    """
    if not (math.isfinite(std) and std > 0.0):
        raise ValueError(f"an uncertainty is positive and finite, not {std}")
    exact = Decimal(repr(float(std)))
    step = Decimal(1).scaleb(exact.adjusted() - 1)
    nearest = exact.quantize(step, rounding=ROUND_HALF_EVEN)
    kept = nearest if nearest >= exact * (1 - SLIGHT) else exact.quantize(step, rounding=ROUND_UP)
    # 9.96 rounds to 10.0, three digits: one place fewer keeps two.
    return kept if kept.adjusted() == exact.adjusted() else kept.quantize(step.scaleb(1))


def decimals_for(std: float) -> int:
    """Decimal places (negative: tens, hundreds) a value keeps with this standard uncertainty."""
    exponent = rounded_uncertainty(std).as_tuple().exponent
    return -int(exponent)


def fixed(value: float, decimals: int) -> str:
    """The value rounded to so many decimals, zeros kept, no exponent; `decimals` below 0 rounds to tens."""
    number = Decimal(repr(float(value))).quantize(Decimal(1).scaleb(-decimals), rounding=ROUND_HALF_EVEN)
    if number == 0:
        number = abs(number)  # no "-0.00"
    return typographic(f"{number:f}")


def bare(value: float | None, digits: int = BARE_DIGITS) -> str:
    """A number without uncertainty, to so many significant digits; "not known" for None and NaN."""
    if value is None or not math.isfinite(value):
        return NOT_KNOWN
    if value == 0.0:
        return "0"
    places = digits - 1 - Decimal(repr(float(value))).adjusted()
    if -3 <= places <= digits + 4:
        text = fixed(value, max(places, 0))
        return text.rstrip("0").rstrip(".") if "." in text else text
    mantissa, exponent = f"{value:.{digits - 1}e}".split("e")
    mantissa = mantissa.rstrip("0").rstrip(".") if "." in mantissa else mantissa
    return typographic(f"{mantissa}e{int(exponent)}")


def typographic(text: str) -> str:
    """A real minus sign: a hyphen breaks at line ends and is easily overlooked in print."""
    return text.replace("-", "−")


def known(number: float | None) -> bool:
    return number is not None and math.isfinite(number)


def std_of(measured: Measured) -> float | None:
    """Standard uncertainty, or the one its 95 % interval implies, or None."""
    if measured.std is not None and math.isfinite(measured.std) and measured.std > 0.0:
        return measured.std
    low, high = measured.low, measured.high
    if low is not None and high is not None and math.isfinite(high - low) and high > low:
        return (high - low) / (2.0 * NORMAL_95)
    return None


def value_text(measured: Measured, most_decimals: int = UNLIMITED) -> str:
    """The value alone, rounded to its uncertainty but to no more than so many decimals; or "not known"."""
    if measured.value is None or not math.isfinite(measured.value):
        return NOT_KNOWN
    std = std_of(measured)
    return (
        bare(measured.value) if std is None else fixed(measured.value, min(decimals_for(std), most_decimals))
    )


def interval_text(measured: Measured) -> str:
    """The 95 % interval as "low to high", "above low", "below high", or empty where not known.

    Open ends are told as such: an interval that is unbounded on one side is a result, too.
    """
    low, high, std = measured.low, measured.high, std_of(measured)
    if std is not None:
        places = decimals_for(std)
        lower, upper = (fixed(end, places) if known(end) else "" for end in (low or 0.0, high or 0.0))
    else:
        lower, upper = bare(low), bare(high)
    if known(low) and known(high):
        return f"{lower} to {upper}"
    if known(low):
        return f"above {lower}"
    return f"below {upper}" if known(high) else ""


def half_width_text(measured: Measured, most_decimals: int = UNLIMITED) -> str:
    """The 95 % interval as "±0.0022", the wider side, where both sides nearly agree; else as its limits."""
    std, value, low, high = std_of(measured), measured.value, measured.low, measured.high
    if std is None or value is None or low is None or high is None or not math.isfinite(high - low):
        return interval_text(measured)
    below, above = value - low, high - value
    wide, narrow = max(below, above), min(below, above)
    if narrow < (1.0 - NEARLY) * wide:
        return interval_text(measured)
    places = min(decimals_for(std), most_decimals)
    # Rounded up: at few decimals a half-width must not vanish.
    step = Decimal(1).scaleb(-places)
    nearest = Decimal(repr(wide)).quantize(step, rounding=ROUND_HALF_EVEN)
    return f"±{nearest if nearest else step:f}"


def measured_text(measured: Measured, unit: str = "") -> str:
    """Value, unit and interval in one phrase: "25.882 Hz (25.835 to 25.929)"."""
    if measured.value is None or not math.isfinite(measured.value):
        ends = interval_text(measured)
        return f"{ends} {unit}".strip() if ends else NOT_KNOWN
    told = f"{value_text(measured)} {unit}".strip()
    ends = interval_text(measured)
    return f"{told} ({ends})" if ends else f"{told} (interval {NOT_KNOWN})"
