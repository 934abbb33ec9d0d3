"""`haltere about`: versions, serial ports, and whether the installation is sound."""

from __future__ import annotations

import argparse
import json
import platform
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

from rig.command.exits import Exit

LIBRARIES = ("numpy", "scipy", "numba", "h5py", "pyserial", "matplotlib", "jinja2", "rich")


def installation() -> tuple[bool, dict[str, str]]:
    """Whether `rig`, `drivers` and `analysis` lie side by side, and where each is.

    Their names are common words: another distribution could shadow one of them without any error.
    """
    import analysis
    import drivers
    import rig

    places = {}
    for package in (rig, drivers, analysis):
        file = package.__file__
        places[package.__name__] = str(Path(file).parent) if file else "no folder"
    return len({str(Path(place).parent) for place in places.values()}) == 1, places


def facts() -> dict[str, Any]:
    """Everything the command tells, as one record."""
    from drivers.ports import serial_ports
    from rig.shipped import shipped_files

    libraries: dict[str, str | None] = {}
    for name in LIBRARIES:
        try:
            libraries[name] = version(name)
        except PackageNotFoundError:
            libraries[name] = None
    together, places = installation()
    return {
        "haltere": version("haltere"),
        "python": platform.python_version(),
        "system": platform.platform(),
        "libraries": libraries,
        "packages_together": together,
        "packages": places,
        "serial_ports": [{"device": port.device, "description": port.description} for port in serial_ports()],
        "shipped": shipped_files(),
    }


def main(words: argparse.Namespace) -> Exit:
    told = facts()
    if words.json:
        print(json.dumps(told, indent=2))
    else:
        print(f"haltere {told['haltere']} on Python {told['python']}, {told['system']}")
        for name, number in told["libraries"].items():
            print(f"  {name:<13}{number or 'missing'}")
        if told["packages_together"]:
            print("the packages rig, drivers and analysis lie side by side, as they should")
        ports = told["serial_ports"]
        print(f"serial ports: {', '.join(port['device'] for port in ports) if ports else 'none'}")
        print(f"shipped rigs and protocols: {', '.join(told['shipped'])}")
        print("powered on the bench: not yet, no physical board has been driven by this version")
    if not told["packages_together"]:
        for name, place in told["packages"].items():
            print(f"package {name} comes from {place}")
        print("another installed distribution shadows one of them: use a virtual environment of its own")
        return Exit.USAGE
    missing = [name for name, number in told["libraries"].items() if number is None]
    return Exit.USAGE if missing else Exit.DONE
