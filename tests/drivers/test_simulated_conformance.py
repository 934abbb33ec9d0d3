"""The simulated benches keep the driver contract."""

from __future__ import annotations

import pytest
from conformance import BenchConformance
from simulated_rigs import COLUMN, make_bench

from drivers.contract import Bench
from drivers.simulated.world import BoardFacts


class TestBoom(BenchConformance):
    @pytest.fixture
    def bench(self) -> Bench:
        return make_bench()


class TestColumn(BenchConformance):
    tap_n_m_s = 5e-4

    @pytest.fixture
    def bench(self) -> Bench:
        return make_bench(COLUMN)


class TestBareBoomNearTickWrap(BenchConformance):
    """No tapper, sync line or releaser; the 32-bit tick wraps 0.25 s after the board has booted."""

    @pytest.fixture
    def bench(self) -> Bench:
        facts = BoardFacts(boot_tick=2**32 - 250_000, frame_rows=7, tapper=False, sync=False, releaser=False)
        return make_bench(board=facts)
