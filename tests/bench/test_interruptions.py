"""Whatever dies, the motor goes off and nothing that was committed is lost.

A few interruptions of each kind; `tests/benchmarks/interruptions.py` does hundreds.
"""

from __future__ import annotations

import random
from collections.abc import Iterator
from pathlib import Path

import pytest
from interruptions import INTERRUPTIONS, interrupt
from trials import StandIn, stand_in


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[StandIn]:
    with stand_in(tmp_path_factory.mktemp("stand-in")) as one:
        yield one


@pytest.mark.parametrize("name", INTERRUPTIONS)
def test_interrupted(served: StandIn, tmp_path: Path, name: str) -> None:
    wait_s = random.Random(name).uniform(0.0, 1.0)
    interrupt(name, served, tmp_path, wait_s)
