"""The rig as described: channels, constants, context."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np

from rig.description import RigDescription
from rig.report.rounding import NOT_KNOWN, bare, measured_text
from rig.results import Measured

RAD_TO_DEG = 180.0 / np.pi
#: Always asked of a session's context; shown as "not known" where nobody wrote it down.
EXPECTED_CONTEXT = ("operator", "specimen")
UNIT_ENDINGS = (
    ("_n_m_s_per_rad", "N m s/rad"),
    ("_n_m_per_rad", "N m/rad"),
    ("_n_s_per_m", "N s/m"),
    ("_n_m_per_a", "N m/A"),
    ("_kg_per_m3", "kg/m³"),
    ("_m_per_s2", "m/s²"),
    ("_m_per_s", "m/s"),
    ("_rad_per_s", "rad/s"),
    ("_n_per_m", "N/m"),
    ("_j_per_k", "J/K"),
    ("_k_per_w", "K/W"),
    ("_s_per_rad", "s/rad"),
    ("_per_k", "1/K"),
    ("_n_m_s", "N m s"),
    ("_kg_m2", "kg m²"),
    ("_n_m", "N m"),
    ("_ohm", "Ω"),
    ("_rad", "rad"),
    ("_m2", "m²"),
    ("_kg", "kg"),
    ("_hz", "Hz"),
    ("_ratio", ""),
    ("_m", "m"),
    ("_h", "H"),
)
#: Parts a mechanism lacks when the named constant is zero; their other constants then mean nothing.
ABSENT_WHEN_ZERO = {
    "wing_": "wing_area_m2",
    "shuttle_": "shuttle_mass_kg",
    "flutter_": "flutter_damping_n_m_s",
    "carriage_stiffness": "carriage_stiffness_n_per_m",
    "motor_coulomb": "motor_coulomb_n_m",
}


@dataclass(frozen=True)
class Fact:
    name: str
    value: str


def context_facts(rig: RigDescription) -> list[Fact]:
    """Session context as written, with the entries a reader will miss named as not known."""
    written = dict(rig.context)
    facts = [Fact(name, written.pop(name, "") or NOT_KNOWN) for name in EXPECTED_CONTEXT]
    return facts + [Fact(name.replace("_", " "), text or NOT_KNOWN) for name, text in written.items()]


def constant_facts(rig: RigDescription) -> list[Fact]:
    """Mechanism constants that are in play, with their uncertainty where the rig file states one."""
    if rig.mechanism is None:
        return []
    absent = [part for part, size in ABSENT_WHEN_ZERO.items() if not getattr(rig.mechanism, size)]
    facts = []
    for field in fields(rig.mechanism):
        if any(field.name.startswith(part) for part in absent):
            continue
        value = getattr(rig.mechanism, field.name)
        name, unit = split_unit(field.name)
        if field.name in rig.unknown:
            facts.append(Fact(name, NOT_KNOWN))
        elif isinstance(value, bool):
            facts.append(Fact(name, "yes" if value else "no"))
        elif field.name == "carriage":
            facts.append(Fact(name, str(value.name).lower()))
        elif value != 0:
            std = rig.constant_std.get(field.name)
            if std:
                facts.append(Fact(name, measured_text(Measured.normal(float(value), std), unit)))
            else:
                facts.append(Fact(name, f"{bare(float(value), 5)} {unit}".strip()))
    return facts


def split_unit(name: str) -> tuple[str, str]:
    """Words and unit of a quantity's name: "hinge_damping_n_m_s" is ("hinge damping", "N m s")."""
    for ending, unit in UNIT_ENDINGS:
        if name.endswith(ending):
            return name[: -len(ending)].replace("_", " ") + (" ratio" if ending == "_ratio" else ""), unit
    return name.replace("_", " "), ""


@dataclass(frozen=True)
class ChannelLine:
    name: str
    measures: str
    scale: str
    polarity: str
    delay: str
    reach: str


def channel_lines(rig: RigDescription) -> list[ChannelLine]:
    lines = []
    for channel in rig.channels:
        if channel.counts_per_turn:
            scale = f"{channel.counts_per_turn} counts per turn" + (
                ", index pulse" if channel.index_pulse else ""
            )
        else:
            scale = f"{bare(channel.scale)} {channel.unit} per count"
        reach = "32 bits"
        if channel.low_raw > -(2**31) or channel.high_raw < 2**31 - 1:
            reach = f"{channel.low_raw} to {channel.high_raw}".replace("-", "−")
        lines.append(
            ChannelLine(
                channel.name,
                channel.measures,
                scale,
                "+" if channel.polarity > 0 else "−",
                f"{bare(1e6 * channel.delay_s, 3)} µs",
                reach,
            )
        )
    return lines


def end_stop_text(rig: RigDescription) -> str:
    low, high = rig.stops.low_rad * RAD_TO_DEG, rig.stops.high_rad * RAD_TO_DEG
    return f"{bare(low, 3)} and {bare(high, 3)} deg"
