"""Whether a board calls itself like the rig it is to be."""

from __future__ import annotations

from dataclasses import replace

import pytest
from running import boom

from drivers.clock import VirtualClock
from rig.bench_source import bench_for
from rig.run.agreement import named_otherwise


@pytest.mark.parametrize(
    ("board", "same"),
    [
        ("boom", True),
        ("boom (stand-in)", True),
        ("  Boom (Stand-in)", True),
        ("column", False),
        ("column (stand-in)", False),
        ("boom-clamped (stand-in)", False),
        ("boom (stand-in) 2", False),
    ],
)
def test_a_board_of_another_name_is_told(board: str, same: bool) -> None:
    rig = boom()
    hello = replace(bench_for(rig, VirtualClock()).open(), name=board)
    told = named_otherwise(rig, hello)
    assert told == ("" if same else f"the board calls itself {board!r}, the rig file is for 'boom'")
