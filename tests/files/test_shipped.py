"""Every shipped file loads, and every protocol fits the rig it is meant for."""

from __future__ import annotations

import pytest

from rig.files import read_pair
from rig.files.forecast import forecast
from rig.files.rig import read_rig
from rig.shipped import find, shipped_files, shipped_folder

RIGS = [name for name in shipped_files() if "haltere_rig" in find(name).read_text(encoding="utf-8")]
PROTOCOLS = [name for name in shipped_files() if name not in RIGS]


def test_there_are_rigs_and_protocols() -> None:
    assert {"boom", "boom-geared", "boom-clamped", "column", "column-flutter"} <= set(RIGS)
    assert {"first-sweep", "column-sweep", "every-step"} <= set(PROTOCOLS)
    assert find("boom") == shipped_folder() / "boom.toml"


@pytest.mark.parametrize("name", RIGS)
def test_rig_loads(name: str) -> None:
    rig = read_rig(find(name))
    assert rig.name == name
    assert rig.mechanism is not None and rig.world is not None


@pytest.mark.parametrize("name", PROTOCOLS)
def test_protocol_fits_its_rig(name: str) -> None:
    rig, protocol = read_pair(find("column" if name.startswith("column") else "boom"), find(name))
    told = forecast(rig, protocol)
    assert protocol.name == name
    assert told.crossings == ()
    assert 0.0 < told.duration_s <= told.at_most_s


def test_the_first_sweep_is_a_long_one() -> None:
    rig, protocol = read_pair(find("boom"), find("first-sweep"))
    assert forecast(rig, protocol).duration_s > 8 * 60.0
