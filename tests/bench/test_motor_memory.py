"""The temperature of a motor outlives a run, cools meanwhile, and is taken as hot after a crash."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from rig.bench.motor_memory import MotorMemory
from rig.description import RigDescription
from rig.files.rig import read_rig
from rig.shipped import find

RIG: RigDescription = replace(read_rig(find("boom")), driver="board")
START_S = 1.8e9


def run(folder: Path, utc_s: float, amps: float, seconds: float) -> tuple[float, float]:
    """Temperatures at the beginning and at the end of a run."""
    memory = MotorMemory(RIG, str(folder), utc_s)
    assert memory.winding is not None
    begin = memory.winding.winding_deg_c
    for _ in range(round(seconds)):
        memory.winding.add(amps**2, 1.0)
    memory.keep(seconds)
    return begin, memory.winding.winding_deg_c


def test_unknown_history_is_hot_and_a_known_one_goes_on(tmp_path: Path) -> None:
    hot, _ = run(tmp_path, START_S, 0.0, 3600.0)
    assert hot > 70.0
    cold, warm = run(tmp_path, START_S + 3600.0 + 3e4, 2.0, 60.0)
    assert cold == pytest.approx(25.0, abs=1.0)
    again, _ = run(tmp_path, START_S + 3600.0 + 3e4 + 61.0, 0.0, 1.0)
    assert 0.7 * (warm - 25.0) < again - 25.0 <= warm - 25.0


def test_after_a_killed_run_the_motor_is_taken_as_hot(tmp_path: Path) -> None:
    run(tmp_path, START_S, 0.0, 3600.0)
    killed = MotorMemory(RIG, str(tmp_path), START_S + 7200.0)
    assert killed.winding is not None and killed.winding.winding_deg_c < 40.0
    assert run(tmp_path, START_S + 7300.0, 0.0, 1.0)[0] > 70.0


def test_rigs_without_a_motor_to_remember(tmp_path: Path) -> None:
    assert MotorMemory(replace(RIG, driver="simulated"), str(tmp_path), START_S).winding is None
    memory = MotorMemory(RIG, "", START_S)
    assert memory.winding is not None
    memory.keep(1.0)
    gone = MotorMemory(RIG, str(tmp_path / "absent"), START_S)
    gone.keep(1.0)
    assert not (tmp_path / "absent").exists()
