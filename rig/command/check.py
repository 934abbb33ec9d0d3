"""`haltere check`: every mistake of a rig file and a protocol, and a dry run."""

from __future__ import annotations

import argparse

from rig.command.exits import Exit
from rig.description import RigDescription
from rig.files import read_pair
from rig.files.forecast import forecast, forecast_lines
from rig.files.rig import read_rig
from rig.files.samplers import sampler_lines
from rig.shipped import find


def main(words: argparse.Namespace) -> Exit:
    if words.protocol is None:
        rig = read_rig(find(words.rig))
        names = ", ".join(channel.name for channel in rig.channels)
        print(f"{words.rig}: no mistakes; rig {rig.name}, {rig.sample_hz:g} rows a second of {names}")
        _tell_samplers(rig)
        return Exit.DONE
    rig, protocol = read_pair(find(words.rig), find(words.protocol))
    print(f"{words.rig}, {words.protocol}: no mistakes")
    _tell_samplers(rig)
    told = forecast(rig, protocol)
    print("\n".join(forecast_lines(told)))
    return Exit.USAGE if told.crossings else Exit.DONE


def _tell_samplers(rig: RigDescription) -> None:
    for line in sampler_lines(rig.samplers):
        print(line)
