"""A whole bench in one process: plant, sensors and board behind the driver contract.

Time is board rows. `read` advances the plant by whole frames as far as the clock's present plus its
wait allows, and lets the clock wait for them, so a virtual clock runs as fast as the plant computes and
the host's clock keeps real time. The same seed and the same commands at the same ticks give the same
bytes, however the reading is cut up.

Notices: `latch` {cause: watchdog | stall | current | guard | stop | bridge}; `sync_edge` {line};
`index` {channel} at the first index pulse and `index_slip` {channel, counts} when a later one comes at
another count; `damaged_frame` {sequence}.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from analysis.mechanism.parameters import Mechanism
from analysis.mechanism.plant import OUT_CRANK, OUT_CURRENT, OUT_DRIVE, OUT_THETA, OUT_VOLTAGE, OUT_WINDING
from drivers.channels import ChannelTable
from drivers.clock import Clock
from drivers.contract import Bench, Capabilities, Halt, Hello, Notice, Reading
from drivers.errors import BenchMisuse, BenchRefused, LinkError, LinkTimeout
from drivers.simulated import readout as ro
from drivers.simulated.board import Board
from drivers.simulated.faults import Faults
from drivers.simulated.frames import FrameLine
from drivers.simulated.noise import TAPS, stream
from drivers.simulated.sensors import Sensors
from drivers.simulated.surroundings import disturbance_of, plant_at_rest
from drivers.simulated.world import BoardFacts, SensorFacts, World

TURN_RAD = 2.0 * math.pi


class SimulatedBench(Bench):
    """A mechanism on a simulated bench.

    ValueError if a channel measures what the bench cannot, or if constants make no mechanism.
    `faults` breaks things on demand. Reopening finds the bench as it was left: the plant does not rest.
    """

    def __init__(
        self,
        mechanism: Mechanism,
        world: World,
        channels: ChannelTable,
        sensors: Mapping[str, SensorFacts],
        board: BoardFacts,
        clock: Clock,
        name: str = "simulated bench",
    ) -> None:
        self._facts = board
        self._world = world
        self._mechanism = mechanism
        self._clock = clock
        self._name = name
        self._period = board.row_period_ticks
        # A fast board clock makes its rows shorter than it believes.
        self._row_s = 1.0 / (board.row_hz * (1.0 + 1e-6 * world.clock_error_ppm))
        disturbance = disturbance_of(mechanism, world, channels, sensors)
        self._plant = plant_at_rest(mechanism, disturbance, world, self._row_s)
        self._sensors = Sensors(self._plant, channels, sensors, world, board)
        self._board = Board(board, self._plant, 1.0 / self._row_s, self._tell)
        self._line = FrameLine(world)
        self.faults = Faults(mechanism, disturbance, self._plant, self._board, self._sensors, self._line)
        self._taps = stream(world.seed, TAPS)
        self._notices: list[Notice] = []
        self._open = False
        self._origin_s: float | None = None
        self._frame: NDArray[np.int32] = np.empty((board.frame_rows, len(channels)), dtype=np.int32)
        self._filled = 0
        self._frame_status = 0
        self._down = False
        crank = channels.measuring("crank angle")
        indexed = crank is not None and sensors.get(channels[crank].name, SensorFacts()).index_pulse
        self._index_column = crank if indexed else None
        self._index_turn: float = math.floor(self._sensors.last[OUT_CRANK] / TURN_RAD)
        self._index_slip: int | None = None

    # Lifecycle

    def open(self) -> Hello:
        if self._open:
            raise BenchMisuse("the bench is open already")
        if self.faults.unplugged:
            raise LinkError("the bench is not connected")
        if self.faults.hung:
            raise LinkTimeout("the bench does not answer")
        if self._origin_s is None:
            self._origin_s = self._clock.now_s()
        self._advance_to(self._due_rows(self._clock.now_s()))
        self._filled = 0
        self._frame_status = 0
        self._notices.clear()
        self._line.restart(self._tick_since_boot)
        self._open = True
        self._down = False
        facts = self._facts
        return Hello(
            name=self._name,
            firmware="simulated in process",
            tick_hz=facts.tick_hz,
            row_period_ticks=self._period,
            frame_rows=facts.frame_rows,
            channels=self._sensors.channels,
            capabilities=Capabilities(
                tapper=facts.tapper, sync=facts.sync, release=facts.releaser, hardware=False
            ),
            heartbeat_timeout_s=facts.heartbeat_timeout_s,
            max_voltage_v=facts.max_voltage_v,
        )

    def close(self) -> None:
        if not self._open:
            return
        self._open = False
        if self.faults.unplugged or self.faults.hung:
            return  # nothing reaches the board any more; its watchdog takes the drive away
        self._advance_to(self._due_rows(self._clock.now_s()))
        self._board.halt(Halt.COAST, 1.0)
        self._board.locked = False

    # Data

    def read(self, max_wait_s: float) -> Reading:
        self._need_link()
        now_s = self._clock.now_s()
        begun = self._board.row - self._filled
        size = self._facts.frame_rows
        due = self._due_rows(now_s + max(max_wait_s, 0.0))
        whole = begun + (due - begun) // size * size
        if whole > self._board.row:
            self._clock.sleep_s(self._time_of(whole) - now_s)
            self._advance_to(whole)
        if not self._line.frames:  # nothing was due, or nothing arrived
            self._clock.sleep_s(now_s + max_wait_s - self._clock.now_s())
        if self.faults.unplugged:
            self._need_link()
        frames, blocks = self._line.take()
        notices: list[Notice] = []
        if self._notices and not self._line.silent:
            notices, self._notices = self._notices, []
        return Reading(frames, blocks, notices)

    # Commands

    def heartbeat(self) -> None:
        self._command()
        self._board.heartbeat()

    def enable(self) -> int:
        tick = self._command()
        self._board.enable()
        return tick

    def drive(self, target_v: float, slew_v_per_s: float) -> int:
        tick = self._command()
        self._board.drive(target_v, slew_v_per_s)
        return tick

    def halt(self, how: Halt, slew_v_per_s: float = 1.0) -> int:
        tick = self._command()
        self._board.halt(how, slew_v_per_s)
        return tick

    def lock(self) -> int:
        tick = self._command()
        self._board.lock()
        return tick

    def unlock(self) -> tuple[int, int]:
        tick = self._command()
        return tick, self._board.unlock()

    def tap(self, impulse_n_m_s: float) -> int:
        tick = self._command(self._facts.tapper, "tapper")
        if not math.isfinite(impulse_n_m_s) or impulse_n_m_s == 0.0:
            raise BenchRefused(f"the tapper cannot give an impulse of {impulse_n_m_s:g} N m s")
        self._board.check_tap()
        scatter = 1.0 + self._world.tap_scatter * self._taps.standard_normal()
        self._board.tap(impulse_n_m_s * scatter, self._world.tap_duration_s)
        return tick

    def sync(self) -> int:
        tick = self._command(self._facts.sync, "sync line")
        self._tell("sync_edge", {"line": "sync"})
        return tick

    def release(self, angle_rad: float) -> int:
        self._command(self._facts.releaser, "releaser")
        low, high = self._mechanism.stop_low_rad, self._mechanism.stop_high_rad
        if not low <= angle_rad <= high:
            raise BenchRefused(f"the body cannot be held at {angle_rad:.4g} rad, beyond its end stops")
        free_row = self._board.hold(angle_rad)
        return self.tick + (free_row - self._board.row) * self._period

    def clear_latch(self) -> None:
        self._command()
        self._board.clear_latch()

    # For tests and for a stand-in's own display: nothing here is measured

    @property
    def tick(self) -> int:
        """Board tick of the newest row, as rows and acknowledgements count it."""
        return self._tick_since_boot + self._line.shift

    def truth(self) -> dict[str, float]:
        """The plant as it truly is at the newest row, SI units."""
        last = self._sensors.last
        return {
            "body_rad": float(last[OUT_THETA]),
            "crank_rad": float(last[OUT_CRANK]),
            "current_a": float(last[OUT_CURRENT]),
            "terminal_v": float(last[OUT_VOLTAGE]),
            "register_v": float(last[OUT_DRIVE]),
            "winding_deg_c": float(last[OUT_WINDING]),
            "flap_hz": self._plant.flap_hz,
        }

    # Time

    @property
    def _tick_since_boot(self) -> int:
        return self._facts.boot_tick + self._board.row * self._period

    def _due_rows(self, time_s: float) -> int:
        """Rows complete by then; the small share of a row covers the rounding of summed waits."""
        origin_s = self._origin_s if self._origin_s is not None else time_s
        return max(int((time_s - origin_s) / self._row_s + 1e-4), self._board.row)

    def _time_of(self, row: int) -> float:
        return (self._origin_s or 0.0) + row * self._row_s

    def _advance_to(self, end: int) -> None:
        board, faults, sensors, size = self._board, self.faults, self._sensors, self._facts.frame_rows
        if faults.next_row <= board.row:
            faults.strike()
        while board.row < end:
            left = size - self._filled
            stop = min(end, board.row + left, board.next_deadline, faults.next_row)
            rows = stop - board.row
            self._frame_status |= board.status
            sensors.sample(rows, self._frame[self._filled :] if self._filled else self._frame)
            board.row = stop
            board.moved_row = sensors.memory[ro.MOVED_ROW]
            self._filled += rows
            if board.next_deadline <= stop:
                board.act()
            if faults.next_row <= stop:
                faults.strike()
            if self._filled == size:
                self._finish_frame()

    def _finish_frame(self) -> None:
        size = self._facts.frame_rows
        begun = self._board.row - size
        tick = self._facts.boot_tick + (begun + 1) * self._period  # a row is stamped at its end
        arrived = self._line.send(tick, self._period, begun, self._frame_status, self._frame)
        if not arrived:
            self._tell("damaged_frame", {"sequence": self._line.sequence - 1})
        self._frame = np.empty_like(self._frame)
        self._filled = 0
        self._frame_status = 0
        if self._index_column is not None:
            self._check_index(self._index_column)
        memory = self._sensors.memory
        self._board.supervise(memory[ro.PEAK_CURRENT])
        memory[ro.PEAK_CURRENT] = 0.0

    def _check_index(self, column: int) -> None:
        """The index pulse comes once a turn; the count at it must stay the same but for whole turns."""
        turn = self._sensors.last[OUT_CRANK] // TURN_RAD
        if turn == self._index_turn:
            return
        self._index_turn = turn
        slipped = self._sensors.slipped(column)
        name = self._sensors.channels[column].name
        if self._index_slip is None:
            self._tell("index", {"channel": name})
        elif slipped != self._index_slip:
            self._tell("index_slip", {"channel": name, "counts": slipped - self._index_slip})
        self._index_slip = slipped

    # Link

    def _tell(self, kind: str, data: dict[str, object]) -> None:
        self._notices.append(Notice(self.tick, kind, data))

    def _need_link(self) -> None:
        if not self._open:
            raise BenchMisuse("the bench is not open")
        if self.faults.unplugged or self._down:
            self._down = True  # a pulled line stays down until it is opened anew
            raise LinkError("the line to the bench is down; check the cable, then connect again")

    def _command(self, present: bool = True, part: str = "") -> int:
        """The tick at which a command of this moment takes effect."""
        self._need_link()
        if not present:
            raise BenchMisuse(f"the bench has no {part}")
        if self.faults.hung:
            raise LinkTimeout("the bench does not answer")
        due = self._due_rows(self._clock.now_s())
        if due > self._board.row:
            self._advance_to(due)
        elif self.faults.next_row <= due:
            self.faults.strike()
        return self.tick
