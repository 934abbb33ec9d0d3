"""Verdicts in JSON: the same ones come back, and nothing else is taken for one."""

from __future__ import annotations

import json
import math
from dataclasses import replace

import numpy as np
import pytest

from rig.verdicts import Condition, LevelVerdict, TapVerdict, Verdict, verdict_from_json, verdict_to_json

MADE: list[Verdict] = [
    Condition(10, 25.5, -0.125, "held", True),
    TapVerdict(20, 3, 1, True, False, "too small", 0.1 + 0.2, 1e-300),
    TapVerdict(20, 3, 1, False, False, "lost"),
    LevelVerdict(30, 1, "bouncing", "unstable", None),
    LevelVerdict(30, 1, "held", "stable", 0.25),
]


@pytest.mark.parametrize("verdict", MADE)
def test_there_and_back(verdict: Verdict) -> None:
    text = json.dumps(verdict_to_json(verdict), allow_nan=False)
    assert verdict_from_json(json.loads(text)) == verdict


def test_numbers_that_are_none_and_numbers_of_numpy() -> None:
    still = Condition(np.int64(10), math.nan, np.float64(0.5), "at_stop", np.bool_(False))  # type: ignore[arg-type]
    told = verdict_to_json(still)
    assert told == {
        "kind": "condition", "tick": 10, "flap_hz": None, "mean_angle_rad": 0.5, "state": "at_stop", "settled": False
    }  # fmt: skip
    assert {type(value) for value in told.values()} == {str, int, type(None), float, bool}
    back = verdict_from_json(told)
    assert isinstance(back, Condition) and math.isnan(back.flap_hz)
    assert replace(back, flap_hz=1.0) == Condition(10, 1.0, 0.5, "at_stop", False)
    assert verdict_to_json(LevelVerdict(1, 2, "held", "stable", math.inf))["decay_half_width_per_s"] is None


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"kind": "weather"}, "'weather' is no kind"),
        ({"kind": None}, "no kind"),
        ({"tick": 1.5}, "1.5 as tick"),
        ({"tick": True}, "True as tick"),
        ({"flap_hz": "fast"}, "'fast' as flap_hz"),
        ({"settled": 1}, "1 as settled"),
        ({"state": None}, "None as state"),
    ],
)
def test_what_is_no_verdict(change: dict[str, object], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        verdict_from_json({**verdict_to_json(MADE[0]), **change})


def test_a_missing_field_is_told() -> None:
    told = verdict_to_json(MADE[1])
    del told["reason"]
    with pytest.raises(ValueError, match="without reason"):
        verdict_from_json(told)
