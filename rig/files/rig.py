"""Rig files: from TOML text to a `RigDescription`, with every mistake at once.

haltere_rig = 1
[rig] [bench] [channel.NAME] [sampler.NAME] [limits] [halts] [motor] [stops] [mechanism] [simulation] [context]
"""

from __future__ import annotations

import hashlib
import math
from pathlib import Path
from typing import Any

from analysis.mechanism.parameters import Mechanism
from rig.description import (
    MotorDescription,
    RigDescription,
    SimulatedWorld,
    StopDescription,
)
from rig.files.channels import read_channels
from rig.files.constants import CARRIAGES, CONSTANTS, REQUIRED, REQUIRED_FOR
from rig.files.limits import read_halts, read_limits
from rig.files.lines import Document, parse, read_text
from rig.files.samplers import read_samplers
from rig.files.table import Table
from rig.files.world import read_world
from rig.problem import FileProblems, Problem

#: "none": a rig described for analysis only, its constants may be unknown.
DRIVERS = ("simulated", "board", "none")
NEEDED = ("body angle", "crank angle", "motor current", "motor voltage")
CONTEXT = (
    "operator",
    "specimen",
    "gravity",
    "air_temperature",
    "air_pressure",
    "humidity",
    "notes",
    "part_changes",
)


def read_rig(path: str | Path) -> RigDescription:
    """Read a rig file. FileProblems with every mistake in it."""
    return rig_from_text(read_text(path), str(path))


def rig_from_text(text: str, name: str) -> RigDescription:
    """Read the text of a rig file called `name` in messages."""
    document = parse(text, name)
    problems: list[Problem] = []
    if "haltere_protocol" in document.data and "haltere_rig" not in document.data:
        line = document.line(("haltere_protocol",))
        raise FileProblems([Problem(name, line, "haltere_protocol", "", "a rig file; this is a protocol")])
    rig = _rig(document, text, problems)
    if problems or rig is None:
        raise FileProblems(sorted(problems, key=lambda problem: problem.line))
    return rig


def _rig(document: Document, text: str, problems: list[Problem]) -> RigDescription | None:
    root = Table(document, (), document.data, problems)
    root.version("haltere_rig")

    def part(name: str, required: bool = True) -> Table:
        table = root.table(name)
        if table is None:
            if required:
                root.wrong(name, None, f"a table [{name}] (it is missing)")
            return Table(document, (name,), {}, [] if required else problems)
        return table

    head, bench = part("rig"), part("bench")
    title = head.text("title")
    name = head.name("name")
    head.finish()
    driver = bench.choice("driver", DRIVERS, "simulated", required=True)
    sample_hz = bench.quantity("sample_rate", "frequency", required=True, low=100.0, high=20_000.0) or 1000.0
    tick_hz = bench.quantity("tick_rate", "frequency", 1e6, low=1e4, high=1e8) or 1e6
    if abs(tick_hz / sample_hz - round(tick_hz / sample_hz)) > 1e-9:
        bench.wrong(
            "sample_rate", bench.data.get("sample_rate"), "a whole number of board ticks between rows"
        )
    frame_rows = bench.integer("frame_rows", 20, 1, 250)
    tapper, releaser = bench.flag("tapper", True), bench.flag("releaser", True)
    sync_line = bench.flag("sync_line", True)
    port, baud = _port(bench, driver)
    bench.finish()

    channels = read_channels(part("channel"))
    for measures in NEEDED:
        if "channel" in root and not any(one.measures == measures for one in channels):
            root.wrong("channel", None, f'a channel with measures = "{measures}" (none has it)')
    stops = _stops(part("stops"))
    limits = read_limits(part("limits"), stops, channels)
    halts = read_halts(part("halts", required=False))
    if frame_rows / sample_hz > 0.5 * limits.stale_s:
        bench.wrong(
            "frame_rows",
            frame_rows,
            f"frames that take at most half of limits.stale = {limits.stale_s:g} s, so that one may come late",
        )
    if limits.flap_hz >= 0.5 * sample_hz:
        limit_table = part("limits")
        limit_table.wrong(
            "flap_rate",
            limit_table.data.get("flap_rate"),
            f"a flap rate below half the sample rate, {0.5 * sample_hz:g} Hz: turns are counted from row to row",
        )
    mechanism, std, unknown = _mechanism(root, stops)
    motor = _motor(root, mechanism)
    world = None
    simulation = root.table("simulation")
    if driver == "simulated":
        if mechanism is None and root.table("mechanism") is None:
            root.wrong(
                "mechanism", None, "a table [mechanism]: a simulated rig needs its constants (it is missing)"
            )
        if unknown:
            table = root.table("mechanism")
            key = next(key for key, (field, _, _) in CONSTANTS.items() if field == unknown[0])
            if table is not None:
                table.wrong(key, "unknown", "a value: a simulated rig needs it")
        world = SimulatedWorld()
    if simulation is not None:
        # Checked whatever the driver: a rig is often simulated again after it was only analysed.
        described = read_world(simulation)
        world = described if driver == "simulated" else None
    context = _context(root.table("context"))
    samplers = read_samplers(root.table("sampler"), port)
    root.finish()
    if problems:
        return None
    return RigDescription(
        name=name,
        title=title,
        driver=driver,
        sample_hz=sample_hz,
        frame_rows=frame_rows,
        tick_hz=round(tick_hz),
        channels=channels,
        limits=limits,
        halts=halts,
        motor=motor,
        stops=stops,
        mechanism=mechanism,
        constant_std=std,
        unknown=unknown,
        world=world,
        context=context,
        tapper=tapper,
        releaser=releaser,
        sync_line=sync_line,
        port=port,
        baud=baud,
        samplers=samplers,
        sha256=hashlib.sha256(text.encode()).hexdigest(),
        text=text,
    )


def _port(bench: Table, driver: str | None) -> tuple[str, int]:
    """Where the board is."""
    port = bench.text("port") if "port" in bench else ""
    baud = bench.integer("baud", 1_000_000, 1200, 12_000_000)
    if driver == "board" and not port:
        bench.wrong("port", None, 'the port of the board, for example "/dev/ttyACM0" (it is missing)')
    return port, baud


def _stops(table: Table) -> StopDescription:
    low = table.quantity("low", "angle", required=True)
    high = table.quantity("high", "angle", required=True)
    table.finish()
    if low is None or high is None:
        return StopDescription(-math.pi, math.pi)
    if low >= high:
        table.wrong("high", table.data.get("high"), "an angle above the lower stop")
        return StopDescription(-math.pi, math.pi)
    return StopDescription(low, high)


def _mechanism(
    root: Table, stops: StopDescription
) -> tuple[Mechanism | None, dict[str, float], tuple[str, ...]]:
    table = root.table("mechanism")
    if table is None:
        return None, {}, ()
    carriage = table.choice("carriage", tuple(CARRIAGES), "clamped", required=True)
    gear = table.number("gear_ratio", 1.0, 0.01, 1000.0)
    preloaded = table.flag("weight_preloaded", carriage == "floating")
    values: dict[str, Any] = {}
    std: dict[str, float] = {}
    unknown = []
    needed = REQUIRED + REQUIRED_FOR[carriage]
    for key, (name, kind, zero) in CONSTANTS.items():
        if table.data.get(key) == "unknown":
            table.text(key)
            unknown.append(name)
            values[name] = 1.0 if not zero else 0.0
            continue
        found = table.uncertain(key, kind)
        if found is None:
            if key in needed and key not in table:
                table.wrong(key, None, f'a value or "unknown" (it is missing from a {carriage} mechanism)')
            continue
        signed = key in ("cm_forward", "wing_incidence")
        if not signed and (found.value < 0.0 or (found.value == 0.0 and not zero)):
            table.wrong(key, table.data[key], "a value " + ("of zero or more" if zero else "above zero"))
            continue
        values[name] = found.value
        if found.std:
            std[name] = found.std
    table.finish()
    if any(CONSTANTS[key][0] not in values for key in needed):
        return None, std, tuple(unknown)
    mechanism = Mechanism(
        carriage=CARRIAGES[carriage],
        gear_ratio=gear,
        weight_preloaded=preloaded,
        stop_low_rad=stops.low_rad,
        stop_high_rad=stops.high_rad,
        **values,
    )
    least = mechanism.body_mass_kg * (mechanism.cm_height_m**2 + mechanism.cm_forward_m**2)
    if not unknown and mechanism.body_inertia_kg_m2 < least:
        words = f"a moment of inertia about the pivot of at least m r^2 = {least:.4g} kg m^2"
        table.wrong("body_inertia", table.data["body_inertia"], words)
    return mechanism, std, tuple(unknown)


def _motor(root: Table, mechanism: Mechanism | None) -> MotorDescription | None:
    """The winding model: from [motor], or from the mechanism's own motor constants."""
    table = root.table("motor")
    usual = mechanism
    if table is None and usual is None:
        return None
    if table is None:
        table = Table(root.document, ("motor",), {}, [])

    def take(key: str, kind: str, default: float | None) -> float:
        assert table is not None
        value = table.quantity(key, kind, default, required=default is None, above=0.0)
        return 1.0 if value is None else value

    ambient = table.quantity("ambient", "temperature", 25.0, low=-40.0, high=60.0)
    motor = MotorDescription(
        resistance_ohm=take("resistance", "resistance", usual.motor_resistance_ohm if usual else None),
        winding_capacity_j_per_k=take(
            "winding_capacity", "heat capacity", usual.winding_capacity_j_per_k if usual else None
        ),
        housing_capacity_j_per_k=take(
            "housing_capacity", "heat capacity", usual.housing_capacity_j_per_k if usual else None
        ),
        winding_housing_k_per_w=take(
            "winding_housing", "thermal resistance", usual.winding_housing_k_per_w if usual else None
        ),
        housing_ambient_k_per_w=take(
            "housing_ambient", "thermal resistance", usual.housing_ambient_k_per_w if usual else None
        ),
        copper_coefficient_per_k=usual.copper_coefficient_per_k if usual else 0.003854,
        ambient_deg_c=25.0 if ambient is None else ambient,
        start_deg_c=table.quantity("start", "temperature", None, low=-40.0, high=150.0),
    )
    table.finish()
    return motor


def _context(table: Table | None) -> dict[str, str]:
    if table is None:
        return {}
    context = {key: table.text(key) for key in CONTEXT if key in table}
    table.finish()
    return context
