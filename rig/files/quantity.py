"""Quantities as people write them: a number, a unit, and nothing that has to be guessed.

A general unit library reads "7,5 V" as 75 V and evaluates "9**9**9 V"; here a text that is not plainly one
number and one unit of the expected kind is refused, and the message says what was expected.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

NUMBER = r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]{1,2})?"
PATTERN = re.compile(rf"({NUMBER})[ \t]*([A-Za-z%°µ/^*0-9· \-]*)")
UNCERTAIN = re.compile(r"\s*(?:\+-|\+/-|±)\s*")

DEG = math.pi / 180.0
#: Kind -> (what is expected in words, example, unit -> factor to SI).
KINDS: dict[str, tuple[str, str, dict[str, float]]] = {
    "voltage": ("a voltage", "7.5 V", {"V": 1.0, "mV": 1e-3}),
    "slew": ("a voltage per time", "0.5 V/s", {"V/s": 1.0, "mV/s": 1e-3}),
    "current": ("a current", "6 A", {"A": 1.0, "mA": 1e-3}),
    "time": ("a time", "200 ms", {"s": 1.0, "ms": 1e-3, "us": 1e-6, "min": 60.0}),
    "angle": ("an angle", "30 deg", {"deg": DEG, "rad": 1.0, "mrad": 1e-3}),
    "frequency": ("a frequency in Hz", "25 Hz", {"Hz": 1.0, "kHz": 1e3, "MHz": 1e6}),
    "impulse": (
        "an angular impulse",
        "0.1 mN m s",
        {"N m s": 1.0, "mN m s": 1e-3, "uN m s": 1e-6, "µN m s": 1e-6},
    ),
    "mass": ("a mass", "72 g", {"kg": 1.0, "g": 1e-3, "mg": 1e-6}),
    "length": ("a length", "30 mm", {"m": 1.0, "cm": 1e-2, "mm": 1e-3, "um": 1e-6, "µm": 1e-6}),
    "area": ("an area", "45 cm^2", {"m^2": 1.0, "cm^2": 1e-4, "mm^2": 1e-6}),
    "inertia": ("a moment of inertia", "154 g cm^2", {"kg m^2": 1.0, "g cm^2": 1e-7, "g mm^2": 1e-9}),
    "force": ("a force", "100 N", {"N": 1.0, "mN": 1e-3, "kN": 1e3}),
    "torque": ("a torque", "0.4 mN m", {"N m": 1.0, "mN m": 1e-3, "uN m": 1e-6, "µN m": 1e-6}),
    "torque constant": ("a torque per current", "6.6 mN m/A", {"N m/A": 1.0, "mN m/A": 1e-3}),
    "torque density": ("a torque per root Hz", "0.9 uN m/rtHz", {"N m/rtHz": 1.0, "uN m/rtHz": 1e-6}),
    "stiffness": ("a stiffness", "190 N/m", {"N/m": 1.0, "N/mm": 1e3, "kN/m": 1e3}),
    "damping": ("a damping constant", "3.8 N s/m", {"N s/m": 1.0}),
    "angular stiffness": ("an angular stiffness", "30 N m/rad", {"N m/rad": 1.0, "mN m/rad": 1e-3}),
    "angular damping": (
        "an angular damping",
        "0.12 mN m s",
        {"N m s": 1.0, "mN m s": 1e-3, "uN m s": 1e-6, "µN m s": 1e-6, "N m s/rad": 1.0},
    ),
    "angular rate": ("an angular rate", "10 rad/s", {"rad/s": 1.0, "deg/s": DEG}),
    "rate": ("a decay rate", "0.05 1/s", {"1/s": 1.0}),
    "resistance": ("a resistance", "1.3 ohm", {"ohm": 1.0, "mohm": 1e-3, "kohm": 1e3}),
    "inductance": ("an inductance", "0.25 mH", {"H": 1.0, "mH": 1e-3, "uH": 1e-6}),
    "temperature": ("a temperature", "25 degC", {"degC": 1.0}),
    "heat capacity": ("a heat capacity", "4 J/K", {"J/K": 1.0}),
    "thermal resistance": ("a thermal resistance", "6 K/W", {"K/W": 1.0}),
    "temperature coefficient": ("a temperature coefficient", "0.003854 1/K", {"1/K": 1.0}),
    "density": ("an air density", "1.2 kg/m^3", {"kg/m^3": 1.0}),
    "speed": ("a speed", "0.15 m/s", {"m/s": 1.0}),
    "acceleration": ("an acceleration", "9.80665 m/s^2", {"m/s^2": 1.0}),
    "share": ("a share", "1 %", {"%": 1e-2, "ppm": 1e-6}),
    "ppm": ("a relative error", "20 ppm", {"ppm": 1.0}),
    "data": ("an amount of data", "200 MB", {"B": 1.0, "kB": 1e3, "MB": 1e6, "GB": 1e9}),
    "s per rad": ("a time per angle", "8 s/rad", {"s/rad": 1.0}),
    "force drift": ("a force per root time", "0.001 N/rts", {"N/rts": 1.0, "mN/rts": 1e-3}),
    "per count N": ("a force per count", "4.6 mN", {"N": 1.0, "mN": 1e-3, "uN": 1e-6}),
}

#: Units of other kinds people reach for, and how to say it instead.
MEANT = {
    "rpm": lambda value: f"{value:g} rpm is {value / 60.0:g} Hz",
    "C": lambda value: f"write {value:g} degC",
    "°C": lambda value: f"write {value:g} degC",
    "Nms": lambda value: f"write {value:g} N m s",
    "mNms": lambda value: f"write {value:g} mN m s",
    "v": lambda value: f"write {value:g} V",
    "hz": lambda value: f"write {value:g} Hz",
    "Ω": lambda value: f"write {value:g} ohm",
    "°": lambda value: f"write {value:g} deg",
    "degrees": lambda value: f"write {value:g} deg",
    "sec": lambda value: f"write {value:g} s",
    "volts": lambda value: f"write {value:g} V",
}


class NotAQuantity(ValueError):
    """A text that is no quantity of the kind; the message is what was expected."""


@dataclass(frozen=True)
class Quantity:
    """A value in SI units (temperature: degC), with its standard uncertainty (0: none given)."""

    value: float
    std: float = 0.0


def expected(kind: str) -> str:
    """What a kind looks like, in words with an example."""
    words, example, _ = KINDS[kind]
    return f'{words} such as "{example}"'


def parse(text: object, kind: str) -> float:
    """One quantity in SI units. NotAQuantity for anything else, with what was expected."""
    if isinstance(text, bool) or not isinstance(text, str):
        if isinstance(text, int | float) and not isinstance(text, bool):
            raise NotAQuantity(f"{expected(kind)}, as text with its unit")
        raise NotAQuantity(expected(kind))
    found = PATTERN.fullmatch(text.strip())
    if found is None or len(text) > 60:
        raise NotAQuantity(_hint(text, kind))
    number, unit = float(found.group(1)), " ".join(found.group(2).split())
    units = KINDS[kind][2]
    if unit not in units:
        known = ", ".join(units)
        if not unit:
            raise NotAQuantity(f"{expected(kind)}; the unit is missing ({known})")
        meant = MEANT.get(unit)
        extra = f"; {meant(number)}" if meant is not None else f"; units: {known}"
        raise NotAQuantity(expected(kind) + extra)
    return number * units[unit]


def parse_uncertain(text: object, kind: str) -> Quantity:
    """A quantity that may carry its standard uncertainty: "72.0 g +- 0.1 g"."""
    if not isinstance(text, str) or not UNCERTAIN.search(text):
        return Quantity(parse(text, kind))
    parts = UNCERTAIN.split(text)
    if len(parts) != 2:
        raise NotAQuantity(f"{expected(kind)}, or with one standard uncertainty after +-")
    value, std = parse(parts[0], kind), parse(parts[1], kind)
    if std <= 0.0:
        raise NotAQuantity("a standard uncertainty above zero after +-")
    return Quantity(value, std)


def _hint(text: str, kind: str) -> str:
    if re.search(r"\d,\d", text):
        return f"{expected(kind)}, with a decimal point, not a comma"
    if re.search(r"\b(nan|inf|infinity)\b", text, re.IGNORECASE):
        return f"{expected(kind)}, a finite number"
    if "**" in text or re.search(r"\d\s*[*/+(]\s*\d", text):
        return f"{expected(kind)}, one number and no formula"
    return expected(kind)
