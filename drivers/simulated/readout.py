"""Kernel of the simulated sensors: rows of the plant become raw integers, as a board would sample them."""

from __future__ import annotations

import math

from analysis.kernel import kernel
from analysis.mechanism.plant import OUT_CRANK, OUT_CURRENT, OUT_VOLTAGE

#: Columns of the sensor specification, one row per channel, all floats. The last four are the weights of
#: the plant's values 0 to 3 rows before the delay's whole rows.
(SOURCE, CONSTANT, SCALE, OFFSET, NOISE, ENCODER, LOW, HIGH, WHOLE_DELAY, DRIFTS, SLIPPED, WEIGHT) = range(12)
DELAY_NODES = 4
SPECIFICATION = WEIGHT + DELAY_NODES

#: What the board and its sensors carry from row to row.
(ZERO_WALK, WALK_STEP, LEAK, CRANK_MARK, MOVED_ROW, ROW, PEAK_CURRENT, MOVE) = range(8)
MEMORY = 8


@kernel
def read_out(trace, old, rows, spec, normals, memory, raw):  # type: ignore[no-untyped-def]
    """Sample rows `old` .. `old + rows` of the trace into `raw`, then keep its last `old` rows as history.

    trace float64 (>= old + rows, plant columns); normals (rows, channels + 1); raw int32 (rows, channels).
    """
    channels = spec.shape[0]
    for k in range(rows):
        here = old + k
        trace[here, OUT_CURRENT] += memory[LEAK] * trace[here, OUT_VOLTAGE]
        memory[ROW] += 1.0
        memory[ZERO_WALK] += memory[WALK_STEP] * normals[k, channels]
        if abs(trace[here, OUT_CURRENT]) > memory[PEAK_CURRENT]:
            memory[PEAK_CURRENT] = abs(trace[here, OUT_CURRENT])
        if abs(trace[here, OUT_CRANK] - memory[CRANK_MARK]) >= memory[MOVE]:
            memory[CRANK_MARK] = trace[here, OUT_CRANK]
            memory[MOVED_ROW] = memory[ROW]
        for c in range(channels):
            source = int(spec[c, SOURCE])
            start = here - int(spec[c, WHOLE_DELAY])
            value = spec[c, CONSTANT] + memory[ZERO_WALK] * spec[c, DRIFTS]
            for j in range(DELAY_NODES):
                weight = spec[c, WEIGHT + j]
                if weight != 0.0:
                    value += weight * trace[start - j, source]
            if spec[c, ENCODER] > 0.0:
                count = math.floor((value - spec[c, OFFSET]) / spec[c, SCALE] + 0.5) + spec[c, SLIPPED]
                # An int32 counter runs over, it does not stop at its end.
                raw[k, c] = int((count + 2147483648.0) % 4294967296.0) - 2147483648
            else:
                value += spec[c, NOISE] * normals[k, c]
                count = math.floor((value - spec[c, OFFSET]) / spec[c, SCALE] + 0.5)
                raw[k, c] = int(min(max(count, spec[c, LOW]), spec[c, HIGH]))
    for k in range(old):
        for j in range(trace.shape[1]):
            trace[k, j] = trace[rows + k, j]
