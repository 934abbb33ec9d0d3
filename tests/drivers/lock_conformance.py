"""What a lock of the drive register must do on every bench; part of the conformance suite."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from drivers.contract import Halt
from drivers.errors import BenchRefused
from drivers.rows import Status

if TYPE_CHECKING:
    from conformance import Owner


class LockConformance:
    """Inherited by the suite, which says what drive to use and how to get there."""

    spin_v: float
    slew_v_per_s: float
    coast_s: float

    def spin(self, owner: Owner) -> None:
        raise NotImplementedError

    def test_a_locked_register_refuses_and_counts_writes(self, owner: Owner) -> None:
        if not owner.hello.capabilities.lock:
            pytest.skip("no lock")
        self.spin(owner)
        owner.bench.lock()
        for _ in range(3):
            with pytest.raises(BenchRefused):
                owner.bench.drive(self.spin_v + 0.5, self.slew_v_per_s)
        blocks = owner.run(0.3)
        assert owner.status & Status.LOCKED
        _, volts = owner.values("motor voltage", blocks)
        assert np.abs(volts - self.spin_v).max() < 0.2
        tick, writes = owner.bench.unlock()
        assert writes == 3
        assert tick >= int(blocks[-1].tick[-1])
        owner.bench.drive(self.spin_v, self.slew_v_per_s)
        owner.bench.lock()
        assert owner.bench.unlock()[1] == 0
        owner.run(0.1)
        assert not owner.status & Status.LOCKED

    def test_lock_and_unlock_come_in_pairs(self, owner: Owner) -> None:
        with pytest.raises(BenchRefused):
            owner.bench.unlock()
        owner.bench.lock()
        with pytest.raises(BenchRefused):
            owner.bench.lock()
        owner.bench.unlock()

    def test_a_latch_ends_the_lock(self, owner: Owner) -> None:
        """A host that dies in an analysed interval leaves a register the next one can write to."""
        if not owner.hello.capabilities.lock:
            pytest.skip("no lock")
        self.spin(owner)
        owner.bench.lock()
        owner.run(2.0 * owner.hello.heartbeat_timeout_s, beat=False)
        assert owner.status & Status.LATCHED and not owner.status & Status.LOCKED
        with pytest.raises(BenchRefused):
            owner.bench.unlock()  # there is no count that anybody could vouch for
        owner.run_until(lambda: owner.allows(owner.bench.clear_latch), self.coast_s)
        self.spin(owner)
        owner.bench.drive(0.5 * self.spin_v, self.slew_v_per_s)
        owner.bench.lock()
        assert owner.bench.unlock()[1] == 0

    @pytest.mark.parametrize("clear_first", [True, False])
    def test_a_fresh_arm_ends_the_lock(self, owner: Owner, clear_first: bool) -> None:
        if not owner.hello.capabilities.lock:
            pytest.skip("no lock")
        self.spin(owner)
        owner.bench.lock()
        owner.bench.enable()  # of a drive that is on it changes nothing,
        owner.bench.clear_latch()  # and there is no latch
        with pytest.raises(BenchRefused):
            owner.bench.drive(0.5 * self.spin_v, self.slew_v_per_s)
        owner.bench.halt(Halt.COAST)
        owner.run(0.2)
        assert owner.status & Status.LOCKED  # a halt of the host's own leaves it: the write is counted
        if clear_first:
            owner.bench.clear_latch()
        owner.run_until(lambda: owner.allows(owner.bench.enable), self.coast_s)
        owner.bench.drive(0.5 * self.spin_v, self.slew_v_per_s)
        owner.run(0.2)
        assert owner.status & Status.ENABLED and not owner.status & Status.LOCKED
