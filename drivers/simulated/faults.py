"""Faults on demand, so that every interlock can be seen to trip.

Each takes effect at the bench's present row, or at a given row with `at`:

    bench.faults.stall_crank()
    bench.faults.at(bench.tick + 2_000_000, lambda faults: faults.open_guard())
"""

from __future__ import annotations

import heapq
from collections.abc import Callable

from analysis.mechanism.disturbance import Disturbance
from analysis.mechanism.packing import pack
from analysis.mechanism.parameters import Mechanism
from analysis.mechanism.plant import Plant
from drivers.simulated import readout as ro
from drivers.simulated.board import NEVER, Board
from drivers.simulated.frames import FrameLine
from drivers.simulated.sensors import Sensors

#: Friction of a jammed gear, N m at the motor: far more than any torque of a small motor.
JAM_N_M = 0.5


class Faults:
    """What can break on the simulated bench. Repairs exist so that a bench can be used again."""

    def __init__(
        self,
        mechanism: Mechanism,
        disturbance: Disturbance,
        plant: Plant,
        board: Board,
        sensors: Sensors,
        line: FrameLine,
    ) -> None:
        self.unplugged = False
        self.hung = False
        self._whole = mechanism
        self._mechanism = mechanism
        self._disturbance = disturbance
        self._plant = plant
        self._board = board
        self._sensors = sensors
        self._line = line
        self._planned: list[tuple[int, int, Callable[[Faults], None]]] = []
        self._count = 0

    # Planning

    def at_row(self, row: int, fault: Callable[[Faults], None]) -> None:
        """Let `fault(self)` happen once `row` rows have been sampled since boot."""
        self._count += 1
        heapq.heappush(self._planned, (row, self._count, fault))

    def at(self, tick: int, fault: Callable[[Faults], None]) -> None:
        """Let `fault(self)` happen at a board tick (counted from boot, not wrapped)."""
        facts = self._board.facts
        self.at_row(-(-(tick - facts.boot_tick) // facts.row_period_ticks), fault)

    @property
    def next_row(self) -> int:
        return self._planned[0][0] if self._planned else NEVER

    def strike(self) -> None:
        """Carry out what is planned up to the present row."""
        while self._planned and self._planned[0][0] <= self._board.row:
            heapq.heappop(self._planned)[2](self)

    # The link

    def lose_frames(self, frames: int) -> None:
        """The next frames never arrive."""
        self._line.lose_next += frames

    def damage_frames(self, frames: int) -> None:
        """The next frames arrive with a flipped bit."""
        self._line.damage_next += frames

    def fall_silent(self) -> None:
        """The board goes on sampling and obeying but sends no rows."""
        self._line.silent = True

    def speak_again(self) -> None:
        self._line.silent = False

    def unplug(self) -> None:
        """Every call but `close` raises LinkError until the line is plugged in and opened again."""
        self.unplugged = self._line.silent = True

    def plug_in(self) -> None:
        self.unplugged = self._line.silent = False

    def hang(self) -> None:
        """Commands get no answer (LinkTimeout) and no rows come; the power stage stays as it is."""
        self.hung = self._line.silent = True

    def wake(self) -> None:
        self.hung = self._line.silent = False

    def restart_board(self) -> None:
        """The board loses its supply for a moment, or is reset: off, and nothing remembered."""
        self._board.restart()

    # Contacts of the board

    def open_guard(self) -> None:
        self._board.guard_open = True
        self._board.contacts_changed()

    def close_guard(self) -> None:
        self._board.guard_open = False

    def press_stop(self) -> None:
        self._board.stop_pressed = True
        self._board.contacts_changed()

    def release_stop(self) -> None:
        self._board.stop_pressed = False

    def fail_bridge(self) -> None:
        self._board.bridge_fault = True
        self._board.contacts_changed()

    def mend_bridge(self) -> None:
        self._board.bridge_fault = False

    def sag_supply(self) -> None:
        """The bus voltage reads low; the board only tells it."""
        self._board.undervoltage = True

    # The mechanism

    def stall_crank(self) -> None:
        """Something jams the crank."""
        self._change(motor_coulomb_n_m=JAM_N_M)

    def break_link(self) -> None:
        """The link from the crank to shuttle, carriage and wings breaks: the crank spins alone."""
        self._change(shuttle_throw_m=0.0, wing_stroke_rad=0.0, shake_amplitude_m=0.0)

    def break_stops(self) -> None:
        """The end stops come off: the body swings beyond them."""
        self._change(stop_stiffness_n_m_per_rad=0.0)

    def break_hinge(self) -> None:
        """The hinge bearing binds: ten times its damping."""
        self._change(hinge_damping_n_m_s=10.0 * self._mechanism.hinge_damping_n_m_s)

    def short_motor(self, ohm: float) -> None:
        """A leak of `ohm` across the motor terminals: the current sensor shows it."""
        if not ohm > 0.0:
            raise ValueError("a leak needs a resistance above 0")
        self._sensors.memory[ro.LEAK] = 1.0 / ohm

    def slip_encoder(self, channel: str, counts: int) -> None:
        """The disc of an encoder slips by `counts`."""
        self._sensors.slip(channel, counts)

    def mend(self) -> None:
        """The mechanism as it was when built, and no leak."""
        self._mechanism = self._whole
        self._sensors.memory[ro.LEAK] = 0.0
        self._change()

    def _change(self, **constants: object) -> None:
        self._mechanism = self._mechanism.with_(**constants)
        self._plant.parameters[:] = pack(self._mechanism, self._disturbance)
