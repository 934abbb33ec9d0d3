"""Broken rig and protocol files: each is one edit of a shipped file, with the sentence it must get.

A sentence names file, line, key, value and what was expected. None of these may raise anything else.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

import pytest

from rig.files.protocol import protocol_from_text
from rig.files.rig import read_rig, rig_from_text
from rig.problem import FileProblems, Problem
from rig.shipped import find

BOOM = find("boom").read_text(encoding="utf-8")
SWEEP = find("first-sweep").read_text(encoding="utf-8")
STEPS = find("every-step").read_text(encoding="utf-8")


@dataclass(frozen=True)
class Broken:
    """One edit: `old` becomes `new` (first occurrence); the problem's key, and words of its sentence."""

    old: str
    new: str
    key: str
    words: str


RIG = [
    Broken('voltage = "13 V"', 'voltage = "13 A"', "limits.voltage", 'a voltage such as "7.5 V"'),
    Broken('voltage = "13 V"', 'voltage = "7,5 V"', "limits.voltage", "a decimal point, not a comma"),
    Broken('voltage = "13 V"', 'voltage = "nan V"', "limits.voltage", "a finite number"),
    Broken('voltage = "13 V"', 'voltage = "inf V"', "limits.voltage", "a finite number"),
    Broken('voltage = "13 V"', 'voltage = "9**9**9 V"', "limits.voltage", "a voltage"),
    Broken('voltage = "13 V"', 'voltage = "1_3 V"', "limits.voltage", "a voltage"),
    Broken('voltage = "13 V"', 'voltage = "13"', "limits.voltage", "the unit is missing"),
    Broken('voltage = "13 V"', "voltage = 13", "limits.voltage", "as text with its unit"),
    Broken('voltage = "13 V"', "voltage = true", "limits.voltage", "a voltage"),
    Broken('voltage = "13 V"', 'voltage = ["13 V"]', "limits.voltage", "a voltage"),
    Broken('voltage = "13 V"', 'voltage = "61 V"', "limits.voltage", "limits shock risk only"),
    Broken('voltage = "13 V"', 'voltage = "-13 V"', "limits.voltage", "above 0"),
    Broken('voltage = "13 V"', 'voltage = "0 V"', "limits.voltage", "above 0"),
    Broken('voltage = "13 V"', 'voltage = "1e400 V"', "limits.voltage", "a voltage"),
    Broken('voltage = "13 V"', 'voltage = "13 volts"', "limits.voltage", "write 13 V"),
    Broken('voltage = "13 V"', 'voltag = "13 V"', "limits.voltag", "did you mean voltage"),
    Broken('voltage = "13 V"\n', "", "limits.voltage", "it is missing"),
    Broken('flap_rate = "60 Hz"', 'flap_rate = "1500 rpm"', "limits.flap_rate", "1500 rpm is 25 Hz"),
    Broken('flap_rate = "60 Hz"', 'flap_rate = "45 rad/s"', "limits.flap_rate", "a frequency in Hz"),
    Broken('current = "6 A"', 'current = "6 mV"', "limits.current", "a current"),
    Broken(
        'winding_temperature = "110 degC"',
        'winding_temperature = "110 C"',
        "limits.winding_temperature",
        "write 110 degC",
    ),
    Broken(
        'winding_temperature = "110 degC"',
        'winding_temperature = "500 degC"',
        "limits.winding_temperature",
        "from 30 to 200",
    ),
    Broken(
        'travel_low = "-15 deg"', 'travel_low = "-3 deg"', "limits.travel_low", "beyond the lower end stop"
    ),
    Broken(
        'travel_high = "45 deg"', 'travel_high = "20 deg"', "limits.travel_high", "beyond the upper end stop"
    ),
    Broken('travel_high = "45 deg"', 'travel_high = "45 degrees"', "limits.travel_high", "write 45 deg"),
    Broken('slew = "1 V/s"', 'slew = "1 V"', "limits.slew", "a voltage per time"),
    Broken('stale = "200 ms"', 'stale = "200 s"', "limits.stale", "from 0.02 to 2"),
    Broken('loss = "1 %"', 'loss = "1"', "limits.loss", "the unit is missing"),
    Broken('disk_reserve = "100 MB"', 'disk_reserve = "100 MiB"', "limits.disk_reserve", "an amount of data"),
    Broken('low = "-4 deg"', 'low = "40 deg"', "stops.high", "above the lower stop"),
    Broken('high = "30 deg"\n', "", "stops.high", "it is missing"),
    Broken("[stops]", "[stop]", "stops", "a table [stops]"),
    Broken("[limits]", "[limit]", "limits", "a table [limits]"),
    Broken('current = "coast"', 'current = "stop"', "halts.current", "one of coast, brake, ramp"),
    Broken('current = "coast"', 'voltage = "brake"', "halts.voltage", "coast: braking or ramping"),
    Broken('current = "coast"', 'heat = "coast"', "halts.heat", "a known key"),
    Broken('driver = "simulated"', 'driver = "simulatd"', "bench.driver", "did you mean simulated"),
    Broken('sample_rate = "1 kHz"', 'sample_rate = "1 khz"', "bench.sample_rate", "a frequency in Hz"),
    Broken('sample_rate = "1 kHz"', 'sample_rate = "1 Hz"', "bench.sample_rate", "from 100 to 20000"),
    Broken(
        'sample_rate = "1 kHz"', 'sample_rate = "3 kHz"', "bench.sample_rate", "a whole number of board ticks"
    ),
    Broken("frame_rows = 20", "frame_rows = 0", "bench.frame_rows", "a whole number from 1 to 250"),
    Broken("frame_rows = 20", "frame_rows = 2.5", "bench.frame_rows", "a whole number"),
    Broken(
        'measures = "body angle"',
        'measures = "body angel"',
        "channel.body.measures",
        "did you mean body angle",
    ),
    Broken(
        'measures = "crank angle"', 'measures = "body angle"', "channel.crank.measures", "body measures it"
    ),
    Broken(
        '[channel.voltage]\nmeasures = "motor voltage"',
        '[channel.voltage]\nmeasures = "temperature"',
        "channel",
        'measures = "motor voltage"',
    ),
    Broken(
        "counts_per_turn = 8192",
        "counts_per_turn = -8192",
        "channel.body.counts_per_turn",
        "a whole number from 16",
    ),
    Broken(
        "counts_per_turn = 8192", 'counts_per_turn = "8192"', "channel.body.counts_per_turn", "a whole number"
    ),
    Broken("counts_per_turn = 8192\n", "", "channel.body.counts_per_turn", "it is missing"),
    Broken(
        "counts_per_turn = 8192",
        "counts_per_turn = 8192\npolarity = 2",
        "channel.body.polarity",
        "from -1 to 1",
    ),
    Broken(
        "counts_per_turn = 8192",
        'counts_per_turn = 8192\ndelay = "2 s"',
        "channel.body.delay",
        "from 0 to 0.05",
    ),
    Broken("bits = 16", "bits = 64", "channel.load.bits", "from 8 to 24"),
    Broken('noise = "20 mN"', 'noise = "20 mV"', "channel.load.noise", "a force"),
    Broken("[channel.load]", "[channel.tick]", "channel.tick", "a channel name"),
    Broken("[channel.load]", "[channel.5v]", "channel.5v", "beginning with a letter"),
    Broken('body_mass = "72 g"', 'body_mass = "72 kN"', "mechanism.body_mass", "a mass"),
    Broken('body_mass = "72 g"', 'body_mass = "0 g"', "mechanism.body_mass", "above zero"),
    Broken(
        'body_mass = "72 g"',
        'body_mass = "72 g +- -1 g"',
        "mechanism.body_mass",
        "a standard uncertainty above zero",
    ),
    Broken('body_mass = "72 g"', 'body_mass = "unknown"', "mechanism.body_mass", "a simulated rig needs it"),
    Broken('body_mass = "72 g"\n', "", "mechanism.body_mass", "it is missing from a floating mechanism"),
    Broken(
        'body_inertia = "1541.6 g cm^2"',
        'body_inertia = "15.4 g cm^2"',
        "mechanism.body_inertia",
        "at least m r^2",
    ),
    Broken(
        'carriage = "floating"',
        'carriage = "flying"',
        "mechanism.carriage",
        "one of floating, geared, clamped",
    ),
    Broken(
        'carriage = "floating"',
        'carriage = "geared"',
        "mechanism.shake_amplitude",
        "missing from a geared mechanism",
    ),
    Broken("gear_ratio = 6", "gear_ratio = nan", "mechanism.gear_ratio", "a plain number"),
    Broken(
        'hinge_damping = "0.12 mN m s"',
        'hinge_damping = "0.12 mNms"',
        "mechanism.hinge_damping",
        "write 0.12 mN m s",
    ),
    Broken('tap_duration = "10 ms"', 'tap_duration = "10 s"', "simulation.tap_duration", "from 0.001 to 0.1"),
    Broken("seed = 1", "seed = -1", "simulation.seed", "a whole number from 0"),
    Broken('notes = "no', 'weather = "no', "context.weather", "a known key"),
    Broken("haltere_rig = 1", "haltere_rig = 2", "haltere_rig", "haltere_rig = 1, the only version"),
    Broken("haltere_rig = 1\n", "", "haltere_rig", "it is missing"),
    Broken('name = "boom"', "name = 5", "rig.name", "a text in quotes"),
    Broken('name = "boom"', 'name = "boom"\nname = "boom"', "name", "given once"),
    Broken("[halts]", "[limits]", "limits", "given once"),
    Broken('name = "boom"', 'name = "boom', "", "TOML"),
    Broken('name = "boom"', "name = ", "", "TOML"),
    Broken("[rig]", "\ufeff[rig]", "", "TOML"),
    Broken("[motor]", "[motor]", "", ""),
]
RIG = [broken for broken in RIG if broken.words]

PROTOCOL = [
    Broken('do = "zero"', 'do = "zeros"', "step.0.do", "did you mean zero"),
    Broken('do = "zero"', 'do = "locate"', "step.0.do", "one of ramp, hold"),
    Broken('do = "zero"\n', "", "step.0.do", "it is missing"),
    Broken('for = "1 s"', 'for = "1 V"', "step.0.for", "a time"),
    Broken('for = "1 s"', 'for = "1 s"\nfo = 2', "step.0.fo", "did you mean for"),
    Broken('order = "rising"', 'order = "up"', "step.1.order", "one of rising, falling"),
    Broken('order = "rising"\n', "", "step.1.order", "it is missing"),
    Broken('"4 V", "5 V"', '"4 V", "5 A"', "step.1.levels", "entry 2"),
    Broken('"4 V", "5 V"', '"4 V", "4 V"', "step.1.levels", "each level once"),
    Broken('"4 V", "5 V"', '"4 V", "-5 V"', "step.1.levels", "above 0 V"),
    Broken('"4 V", "5 V"', '"4 V", "14 V"', "step.1.levels", "the rig's limit of 13 V"),
    Broken(
        'levels = ["4 V", "5 V", "6 V", "6.5 V", "7 V"]', "levels = []", "step.1.levels", "1 to 500 levels"
    ),
    Broken(
        'levels = ["4 V", "5 V", "6 V", "6.5 V", "7 V"]',
        'levels = "5 V"',
        "step.1.levels",
        "a list of voltages",
    ),
    Broken('levels = ["4 V", "5 V", "6 V", "6.5 V", "7 V"]\n', "", "step.1.from", "it is missing"),
    Broken('step = "0.1 V"', 'step = "0 V"', "step.2.step", "above 0"),
    Broken('step = "0.1 V"', 'step = "1 mV"\nlevels = ["5 V"]', "step.2.from", "not both"),
    Broken('step = "0.1 V"', 'step = "0.1 mV"', "step.2.step", "at most 500 levels"),
    Broken('taps = ["0.1 mN m s"]', 'taps = ["0.1 mNm"]', "step.1.taps", "an angular impulse"),
    Broken('taps = ["0.1 mN m s"]', 'taps = ["0 mN m s"]', "step.1.taps", "not zero"),
    Broken('taps = ["0.1 mN m s"]', 'taps = []\nprecision = "0.1 1/s"', "step.1.precision", "taps beside it"),
    Broken(
        'settle_at_most = "2 s"', 'settle_at_most = "1 s"', "step.1.settle_at_most", "no shorter than settle"
    ),
    Broken('settle = "2 s"', 'settle = "2 s"\nslew = "5 V/s"', "step.1.slew", "the rig's limit of 1 V/s"),
    Broken('settle = "2 s"', 'settle = "2 s"\nseed = 3', "step.1.seed", "a seed only with"),
    Broken(
        'settle = "2 s"', 'settle = "2 s"\nreturn_every = 3', "step.1.return_every", "return_to beside it"
    ),
    Broken('settle = "2 s"', 'settle = "2 s"\nby = "foot"', "step.1.by", "one of tapper, hand"),
    Broken("stop_after_lost = 2", "stop_after_lost = -2", "step.5.stop_after_lost", "a whole number from 0"),
    Broken("haltere_protocol = 1\n", "", "haltere_protocol", "it is missing"),
    Broken("[protocol]", "[protocl]", "protocol", "a table [protocol]"),
    Broken('name = "first-sweep"\n', "", "protocol.name", "it is missing"),
]

STEP = [
    Broken('to = "10 V"', 'to = "20 V"', "step.2.to", "the rig's limit of 13 V"),
    Broken('to = "10 V"\n', "", "step.2.to", "it is missing"),
    Broken('until = "settled"', 'until = "calm"', "step.3.until", "one of settled, precise"),
    Broken('until = "settled"', 'until = "settled"\nfor = "1 s"', "step.3", "not both or neither"),
    Broken('until = "settled"', 'until = "settled"\nprecision = "0.1 1/s"', "step.3.precision", "only with"),
    Broken('precision = "0.05 1/s"\n', "", "step.8.until", "precision and impulse beside it"),
    Broken('impulse = "0.1 mN m s"', 'impulse = "0 mN m s"', "step.7.impulse", "not zero"),
    Broken('angle = "10 deg"', 'angle = "80 deg"', "step.9.angle", "between the end stops"),
    Broken("times = 2", "times = 0", "step.10.times", "a whole number from 1"),
    Broken("[[step.step]]", "[step.step]", "step.10.step", "one or more [[step]] tables"),
    Broken('text = "camera on"\n', "", "step.4.text", "it is missing"),
    Broken('for = "2 s"', 'for = "-2 s"', "step.6.for", "above 0"),
]

#: What describes a second device that prints text lines, at the end of a rig file.
SAMPLED = """
[sampler.strain]
port = "/dev/ttyUSB1"
baud = 57600
delimiter = "comma"
tick_rate = "1 MHz"
[sampler.strain.column.clock]
measures = "tick"
[sampler.strain.column.force]
measures = "vertical load"
per_count = "1 mN"
zero = "0.2 N"
polarity = -1
[sampler.strain.column.arm]
measures = "body angle"
counts_per_turn = 4096
[sampler.strain.column.valve]
measures = "other"
per_count = 0.5
"""
IN = "sampler.strain"
SAMPLER = [
    Broken('port = "/dev/ttyUSB1"\n', "", f"{IN}.port", "it is missing"),
    Broken('port = "/dev/ttyUSB1"', "port = 1", f"{IN}.port", "a text in quotes"),
    Broken('port = "/dev/ttyUSB1"', 'port = " "', f"{IN}.port", "the port of the device"),
    Broken("baud = 57600", "baud = 57.6", f"{IN}.baud", "a whole number from 300"),
    Broken(
        'delimiter = "comma"', 'delimiter = ","', f"{IN}.delimiter", "one of comma, semicolon, tab, space"
    ),
    Broken('delimiter = "comma"', 'delimiter = "coma"', f"{IN}.delimiter", "did you mean comma"),
    Broken('delimiter = "comma"\n', "", f"{IN}.delimiter", "it is missing"),
    Broken('tick_rate = "1 MHz"', 'tick_rate = "1 M"', f"{IN}.tick_rate", "a frequency in Hz"),
    Broken('tick_rate = "1 MHz"', 'tick_rate = "0 Hz"', f"{IN}.tick_rate", "from 1 to 1e+09"),
    Broken('tick_rate = "1 MHz"\n', "", f"{IN}.tick_rate", "it is missing"),
    Broken('measures = "tick"', 'measures = "other"', f"{IN}.tick_rate", 'measures = "tick" beside it'),
    Broken(
        'measures = "other"\nper_count = 0.5',
        'measures = "tick"',
        f"{IN}.column.valve.measures",
        "one already",
    ),
    Broken('measures = "tick"', 'measures = "tick"\nzero = 1', f"{IN}.column.clock.zero", "a known key"),
    Broken(
        'measures = "vertical load"', 'measures = "load"', f"{IN}.column.force.measures", "one of body angle"
    ),
    Broken('per_count = "1 mN"', 'per_count = "1 mV"', f"{IN}.column.force.per_count", "a force"),
    Broken('per_count = "1 mN"', 'per_count = "0 mN"', f"{IN}.column.force.per_count", "above 0"),
    Broken('per_count = "1 mN"\n', "", f"{IN}.column.force.per_count", "it is missing"),
    Broken("per_count = 0.5", 'per_count = "0.5 V"', f"{IN}.column.valve.per_count", "a plain number"),
    Broken("polarity = -1", "polarity = 0", f"{IN}.column.force.polarity", "1 or -1"),
    Broken("counts_per_turn = 4096", "counts_per_turn = 0", f"{IN}.column.arm.counts_per_turn", "from 1 to"),
    Broken("counts_per_turn = 4096\n", "", f"{IN}.column.arm.per_count", "it is missing"),
    Broken("column.valve]", "column.tick]", f"{IN}.column.tick", "a column name"),
    Broken("column.valve]", 'column."2nd valve"]', f"{IN}.column.2nd valve", "a column name"),
    Broken("polarity = -1", 'unit = "N"', f"{IN}.column.force.unit", "a known key"),
    Broken("baud = 57600", "bauds = 57600", f"{IN}.bauds", "did you mean baud"),
]


def broken(text: str, edit: Broken) -> str:
    assert edit.old in text, edit.old
    return text.replace(edit.old, edit.new, 1)


def told(problems: tuple[Problem, ...], edit: Broken, text: str, name: str) -> None:
    matching = [problem for problem in problems if problem.key == edit.key and edit.words in problem.expected]
    assert matching, [str(problem) for problem in problems]
    problem = matching[0]
    assert problem.file == name
    assert 0 <= problem.line <= text.count("\n") + 1
    assert "\n" not in str(problem) and str(problem).startswith(name)
    if "missing" not in edit.words and "a table [" not in edit.words and problem.line:
        key = edit.key.split(".")[-1]
        row = text.splitlines()[problem.line - 1]
        assert not key or key.isdigit() or key in row or key in ("limits", "channel") or "[[step" in row, row


@pytest.mark.parametrize(
    "edit", RIG, ids=lambda edit: re.sub(r"\s+", " ", edit.new)[:40] or f"no {edit.old[:30]!r}"
)
def test_broken_rig(edit: Broken) -> None:
    text = broken(BOOM, edit)
    with pytest.raises(FileProblems) as caught:
        rig_from_text(text, "rig.toml")
    told(caught.value.problems, edit, text, "rig.toml")


@pytest.mark.parametrize(
    "edit", SAMPLER, ids=lambda edit: re.sub(r"\s+", " ", edit.new)[:40] or f"no {edit.old[:30]!r}"
)
def test_broken_sampler(edit: Broken) -> None:
    text = BOOM + broken(SAMPLED, edit)
    with pytest.raises(FileProblems) as caught:
        rig_from_text(text, "rig.toml")
    told(caught.value.problems, edit, text, "rig.toml")


@pytest.mark.parametrize(
    "edit", PROTOCOL, ids=lambda edit: re.sub(r"\s+", " ", edit.new)[:40] or f"no {edit.old[:30]!r}"
)
def test_broken_protocol(edit: Broken) -> None:
    text = broken(SWEEP, edit)
    with pytest.raises(FileProblems) as caught:
        protocol_from_text(text, "protocol.toml", read_rig(find("boom")))
    told(caught.value.problems, edit, text, "protocol.toml")


@pytest.mark.parametrize(
    "edit", STEP, ids=lambda edit: re.sub(r"\s+", " ", edit.new)[:40] or f"no {edit.old[:30]!r}"
)
def test_broken_step(edit: Broken) -> None:
    text = broken(STEPS, edit)
    with pytest.raises(FileProblems) as caught:
        protocol_from_text(text, "protocol.toml", read_rig(find("boom")))
    told(caught.value.problems, edit, text, "protocol.toml")


def test_the_table_is_large_enough() -> None:
    assert len(RIG) + len(PROTOCOL) + len(STEP) >= 100


def test_all_mistakes_are_told_at_once_in_order_of_line() -> None:
    text = BOOM.replace('"13 V"', '"13 A"').replace('"60 Hz"', '"60 rpm"').replace('"72 g"', '"72"')
    with pytest.raises(FileProblems) as caught:
        rig_from_text(text, "rig.toml")
    problems = caught.value.problems
    assert [problem.key for problem in problems] == [
        "limits.voltage",
        "limits.flap_rate",
        "mechanism.body_mass",
    ]
    assert [problem.line for problem in problems] == sorted(problem.line for problem in problems)


def test_the_line_is_the_right_one() -> None:
    text = BOOM.replace('flap_rate = "60 Hz"', 'flap_rate = "60 Hz"')
    line = next(k for k, row in enumerate(text.splitlines(), 1) if row.startswith("flap_rate"))
    text = text.replace('flap_rate = "60 Hz"', 'flap_rate = "60 rpm"')
    with pytest.raises(FileProblems) as caught:
        rig_from_text(text, "rig.toml")
    assert [problem.line for problem in caught.value.problems] == [line]
    assert str(caught.value.problems[0]) == (
        f'rig.toml:{line}: limits.flap_rate = "60 rpm": expected a frequency in Hz such as "25 Hz"; 60 rpm is 1 Hz'
    )
