"""The board driver keeps the driver contract, whatever way its bytes are cut."""

from __future__ import annotations

import pytest
from conformance import BenchConformance
from simulated_rigs import COLUMN, make_bench
from wired import wired

from drivers.contract import Bench
from drivers.simulated.world import BoardFacts


class TestBoomOnAWire(BenchConformance):
    @pytest.fixture
    def bench(self) -> Bench:
        return wired(make_bench)[0]


class TestColumnInSmallPieces(BenchConformance):
    """Bytes come seven at a time, on a board without tapper, sync line or releaser, near the tick's wrap."""

    tap_n_m_s = 5e-4

    @pytest.fixture
    def bench(self) -> Bench:
        facts = BoardFacts(boot_tick=2**32 - 250_000, frame_rows=7, tapper=False, sync=False, releaser=False)
        bench, cable = wired(lambda clock: make_bench(COLUMN, clock=clock, board=facts))
        cable.block = 150
        return bench
