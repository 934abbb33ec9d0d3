"""A bench whose every sample is a known function of its tick, at any rate; served as a board when run.

python synthetic_bench.py ROW_HZ FRAME_ROWS CHANNELS pty|tcp [FLAP_HZ UNTIL_S]

The crank is at rest, or turns at FLAP_HZ until UNTIL_S of the board's time and rests from then on.
"""

from __future__ import annotations

import json
import math
import signal
import sys

import numpy as np
from numpy.typing import NDArray

from drivers.channels import Channel, ChannelTable
from drivers.clock import Clock, HostClock
from drivers.contract import Bench, Capabilities, Halt, Hello, Reading
from drivers.rows import RowBlock, RowFrame, Status
from drivers.standin.board_end import BoardEnd
from drivers.standin.pace import SlippingClock
from drivers.standin.places import PtyPlace, TcpPlace
from drivers.standin.serving import Server

TICK_HZ = 1_000_000
COUNTS_PER_TURN = 2**20
MEASURES = ("body angle", "crank angle", "motor current", "motor voltage", "vertical load", "carriage height")


def channel_table(channels: int) -> ChannelTable:
    """The channels of a rig first, then temperatures; scales keep every value far inside a rig's limits."""
    made = []
    for index in range(channels):
        measures = MEASURES[index] if index < len(MEASURES) else "temperature"
        unit = {
            "temperature": "degC",
            "vertical load": "N",
            "carriage height": "m",
            "motor current": "A",
        }.get(measures)
        unit = unit or {"motor voltage": "V"}.get(measures, "rad")
        scale = 2.0 * math.pi / COUNTS_PER_TURN if unit == "rad" else 1e-6
        made.append(Channel(f"c{index}", measures, unit, scale))
    return ChannelTable(tuple(made))


def samples(
    tick: NDArray[np.int64], channels: int, flap_hz: float = 0.0, until_s: float = 0.0
) -> NDArray[np.int32]:
    """Raw values, shape (n, channels): a different pseudo-random number in every place, 14 bits wide; the crank turns
    as often as asked for. ValueError if it would turn further than raw values reach."""
    spread = (tick[:, None] * 2654435761 + np.arange(channels) * 40503) & 0xFFFFFFFF
    raw = (spread ^ (spread >> 15)) & 0x3FFF
    counts_per_s, until_tick = round(flap_hz * COUNTS_PER_TURN), round(until_s * TICK_HZ)
    if counts_per_s * until_s >= 2**31:
        raise ValueError(f"the crank cannot turn at {flap_hz:g} Hz for {until_s:g} s")
    raw[:, 1] = np.minimum(tick, until_tick) * counts_per_s // TICK_HZ
    return raw.astype(np.int32)


class SyntheticBench(Bench):
    """Obeys every command and measures nothing."""

    def __init__(
        self,
        clock: Clock,
        row_hz: float,
        frame_rows: int,
        channels: int,
        turns: tuple[float, float] = (0.0, 0.0),
    ) -> None:
        self._clock = clock
        self._turns = turns
        self._frame_rows = frame_rows
        self._period = round(TICK_HZ / row_hz)
        self._channels = channels
        self._frames = 0
        self._status = 0
        self._origin_s = clock.now_s()

    def open(self) -> Hello:
        return Hello(
            "synthetic rows",
            "none",
            TICK_HZ,
            self._period,
            self._frame_rows,
            channel_table(self._channels),
            Capabilities(),
        )

    def close(self) -> None:
        self._status = 0

    def read(self, max_wait_s: float) -> Reading:
        span = self._frame_rows * self._period
        due = int((self._clock.now_s() - self._origin_s) * TICK_HZ) // span
        frames = []
        while self._frames < due:
            first = self._frames * span
            tick = np.arange(first, first + span, self._period, dtype=np.int64)
            raw = samples(tick, self._channels, *self._turns)
            frames.append(
                RowFrame(
                    self._frames,
                    first & 0xFFFFFFFF,
                    self._period,
                    self._frames * self._frame_rows,
                    self._status,
                    0,
                    raw,
                )
            )
            self._frames += 1
        return Reading(frames, [RowBlock(np.empty(0, np.uint64), frame.raw) for frame in frames])

    @property
    def tick(self) -> int:
        return self._frames * self._frame_rows * self._period

    def heartbeat(self) -> None: ...

    def enable(self) -> int:
        self._status |= int(Status.ENABLED)
        return self.tick

    def drive(self, target_v: float, slew_v_per_s: float) -> int:
        return self.tick

    def halt(self, how: Halt, slew_v_per_s: float = 1.0) -> int:
        self._status = 0
        return self.tick

    def lock(self) -> int:
        return self.tick

    def unlock(self) -> tuple[int, int]:
        return self.tick, 0

    def tap(self, impulse_n_m_s: float) -> int:
        return self.tick

    def sync(self) -> int:
        return self.tick

    def release(self, angle_rad: float) -> int:
        return self.tick

    def clear_latch(self) -> None: ...


def main() -> None:
    row_hz, frame_rows, channels, where = float(sys.argv[1]), int(sys.argv[2]), int(sys.argv[3]), sys.argv[4]
    turns = (float(sys.argv[5]), float(sys.argv[6])) if len(sys.argv) > 5 else (0.0, 0.0)
    clock = HostClock()
    pace = SlippingClock(clock)
    board = BoardEnd(SyntheticBench(pace, row_hz, frame_rows, channels, turns), pace)
    place = TcpPlace() if where == "tcp" else PtyPlace()
    going = [True]
    signal.signal(signal.SIGINT, lambda *_: going.clear())
    print(place.address, flush=True)
    Server(board, place, clock, pace).serve(lambda: bool(going), 0.0005)
    place.close()
    print(
        json.dumps(
            {**json.loads(board.summary()), "pauses": pace.pauses, "paused_s": round(pace.slipped_s, 3)}
        )
    )


if __name__ == "__main__":
    main()
