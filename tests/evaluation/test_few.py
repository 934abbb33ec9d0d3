"""Sessions of one level or none: nothing in the plural, and nothing told where there is nothing to tell."""

from __future__ import annotations

import dataclasses

import pytest

from analysis.boundary.falling import falling_boundary
from analysis.boundary.rising import rising_boundary
from analysis.passivity import judge
from analysis.vibration import StiffnessPoint
from analysis.vibration import judge as judge_vibration
from drivers.clock import VirtualClock
from rig.bench_source import bench_for
from rig.evaluation.analyst import Analyst
from rig.evaluation.conclusions import _remarks
from rig.evaluation.evidence import Evidence, level_points
from rig.files.rig import read_rig
from rig.results import LevelResult, Measured
from rig.shipped import find


def empty() -> Evidence:
    rig = read_rig(find("boom"))
    hello = bench_for(rig, VirtualClock()).open()
    return Analyst(rig, hello.channels, hello.tick_hz).evidence()


def test_without_a_level_that_is_the_reason() -> None:
    rig = read_rig(find("boom"))
    hello = bench_for(rig, VirtualClock()).open()
    result = Analyst(rig, hello.channels, hello.tick_hz).finish()
    assert (
        result.falling.reason == "no level was reached"
        and result.rising.reason == "no rising level was reached"
    )
    assert result.passivity.reason == "no level was reached, there are no intervals to look at"
    assert rising_boundary([]).reason == "no rising level was reached"
    assert falling_boundary([], None).reason == "no level was reached"


@pytest.mark.parametrize(
    ("levels", "told"), [(0, ""), (1, ""), (4, ""), (6, "6 levels were given"), (30, "0.3 of them")]
)
def test_what_may_be_expected_wrong(levels: int, told: str) -> None:
    evidence = empty()
    evidence = dataclasses.replace(evidence, levels=(_level(),) * levels)
    remarks = [
        one for one in _remarks(evidence, falling_boundary([], None), level_points(empty())) if "99 %" in one
    ]
    assert len(remarks) == bool(told)
    assert all(told in one and "0.0" not in one for one in remarks)


def _level() -> LevelResult:
    known = Measured(9.0)
    return LevelResult("rising", known, known, known, known, known, known, known, 2, 2, "stable", "held", "")


def test_one_of_them_is_no_plural() -> None:
    assert "during 1 locked interval" in judge([1], [], locked=True).reason
    assert "written 1 time " in judge([1], [], locked=True).reason
    assert "in 2 locked intervals" in judge([0, 0], [], locked=True).reason
    point = StiffnessPoint(30.0, 100.0, 1.0)
    assert judge_vibration(
        [point], boundary_hz=None, shake_amplitude_m=None, length_m=None
    ).reason.startswith("1 held level clear")
