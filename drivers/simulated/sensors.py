"""The sensors of a simulated bench: encoders, load cell, motor current and voltage, carriage height."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from analysis.mechanism.plant import (
    OUT_CELL,
    OUT_CRANK,
    OUT_CURRENT,
    OUT_HEIGHT,
    OUT_THETA,
    OUT_VOLTAGE,
    ROW_COLUMNS,
    Plant,
)
from drivers.channels import Channel, ChannelTable
from drivers.simulated import readout as ro
from drivers.simulated.noise import SENSORS, NormalRows, stream
from drivers.simulated.world import BoardFacts, SensorFacts, World

#: Plant column behind each measured quantity.
SOURCES = {
    "body angle": OUT_THETA,
    "crank angle": OUT_CRANK,
    "vertical load": OUT_CELL,
    "motor current": OUT_CURRENT,
    "motor voltage": OUT_VOLTAGE,
    "carriage height": OUT_HEIGHT,
}
ENCODED = ("body angle", "crank angle")
MOVE_RAD = 2.0 * math.pi / 20.0


def delay_weights(rows: float) -> tuple[int, tuple[float, ...]]:
    """Whole rows and four weights that give a value `rows` rows old by cubic interpolation.

    Only rows that exist by then are used (Lagrange nodes 0, 1, 2, 3 rows back), as a board could.
    """
    if not 0.0 <= rows <= 1000.0:
        raise ValueError(f"a delay of {rows:g} rows cannot be simulated; 0 to 1000 rows can")
    whole = math.floor(rows)
    part = rows - whole
    weights = []
    for j in range(ro.DELAY_NODES):
        weight = 1.0
        for k in range(ro.DELAY_NODES):
            if k != j:
                weight *= (part - k) / (j - k)
        weights.append(weight)
    return whole, tuple(weights)


class Sensors:
    """Samples a plant into raw rows of the channel table.

    An encoder is a `body angle` or `crank angle` channel with `counts_per_turn`; everything else goes
    through a converter that rounds to its step and saturates at the channel's raw limits.
    """

    def __init__(
        self,
        plant: Plant,
        channels: ChannelTable,
        facts: Mapping[str, SensorFacts],
        world: World,
        board: BoardFacts,
    ) -> None:
        self.channels = channels
        self._plant = plant
        row_s = 1.0 / board.row_hz
        self._spec = np.zeros((len(channels), ro.SPECIFICATION))
        for column, channel in enumerate(channels):
            self._specify(column, channel, facts.get(channel.name, SensorFacts()), world, row_s)
        longest = int(self._spec[:, ro.WHOLE_DELAY].max(initial=0.0))
        self._old = longest + ro.DELAY_NODES - 1
        self._longest_span = board.frame_rows
        self._trace = np.zeros((self._old + self._longest_span, ROW_COLUMNS))
        self._fresh = self._trace[self._old :]
        self._normals = NormalRows(stream(world.seed, SENSORS), len(channels) + 1)
        self.memory = np.zeros(ro.MEMORY)
        self.memory[ro.WALK_STEP] = world.load_drift_n_per_rt_s * math.sqrt(row_s)
        self.memory[ro.MOVE] = MOVE_RAD
        # Before the first row everything was as it is at rest.
        rest = np.empty((1, ROW_COLUMNS))
        at_rest = self._plant.record.copy()
        plant.advance(1, rest)
        plant.record[:] = at_rest
        self._trace[: self._old] = rest
        self.memory[ro.CRANK_MARK] = rest[0, OUT_CRANK]
        self.memory[ro.MOVED_ROW] = -math.inf
        # No rows: compiles the kernel before anything is armed.
        nothing = np.empty((0, len(channels)), dtype=np.int32)
        ro.read_out(self._trace, self._old, 0, self._spec, self._normals.take(0), self.memory, nothing)

    def _specify(self, column: int, channel: Channel, facts: SensorFacts, world: World, row_s: float) -> None:
        spec = self._spec[column]
        if channel.measures == "temperature":
            # The air beside the bench; a winding's true temperature is nobody's to read.
            spec[ro.CONSTANT] = world.ambient_deg_c
        elif channel.measures in SOURCES:
            spec[ro.SOURCE] = SOURCES[channel.measures]
            whole, weights = delay_weights(channel.delay_s / row_s)
            spec[ro.WHOLE_DELAY] = whole
            spec[ro.WEIGHT :] = weights
        else:
            raise ValueError(f"the simulated bench has no sensor for {channel.measures} ({channel.name})")
        if facts.counts_per_turn and channel.measures not in ENCODED:
            raise ValueError(f"an encoder cannot measure {channel.measures} ({channel.name})")
        spec[ro.SCALE] = channel.scale
        spec[ro.OFFSET] = channel.offset
        spec[ro.NOISE] = facts.noise
        spec[ro.ENCODER] = 1.0 if facts.counts_per_turn else 0.0
        spec[ro.LOW] = channel.low_raw
        spec[ro.HIGH] = channel.high_raw
        spec[ro.DRIFTS] = 1.0 if channel.measures == "vertical load" else 0.0

    def sample(self, rows: int, raw: NDArray[np.int32]) -> None:
        """Advance the plant by `rows` rows and write what the sensors show into `raw`."""
        self._plant.advance(rows, self._fresh)
        ro.read_out(self._trace, self._old, rows, self._spec, self._normals.take(rows), self.memory, raw)

    @property
    def last(self) -> NDArray[np.float64]:
        """The plant's newest row, as it truly is (a leak's current included)."""
        return self._trace[self._old - 1]

    def slip(self, name: str, counts: int) -> None:
        """An encoder disc slips on its shaft: its count is off by `counts` from now on."""
        column = self.channels.index(name)
        if not self._spec[column, ro.ENCODER]:
            raise ValueError(f"{name} is no encoder")
        self._spec[column, ro.SLIPPED] += counts

    def slipped(self, column: int) -> int:
        return int(self._spec[column, ro.SLIPPED])
