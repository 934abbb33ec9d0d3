"""Row frames on the wire: the header of `drivers.rows`, then samples in the width each channel needs.

An encoder count takes 32 bits, a converter's value 16: six channels at 1 kHz fit a line of 250 kbaud. On the
host every sample becomes int32.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from drivers.channels import ChannelTable
from drivers.link.framing import LinkDamage
from drivers.rows import HEADER, RowFrame

#: Names of sample types in a hello -> numpy types.
WIDTHS = {"i32": "<i4", "i16": "<i2", "u16": "<u2"}


def widths_for(channels: ChannelTable) -> tuple[str, ...]:
    """The narrowest type that holds each channel's range."""
    return tuple(
        "i16"
        if channel.low_raw >= -(2**15) and channel.high_raw < 2**15
        else "u16"
        if channel.low_raw >= 0 and channel.high_raw < 2**16
        else "i32"
        for channel in channels
    )


class RowCoding:
    """Packs and unpacks row frames of one bench; KeyError for a width that is none."""

    def __init__(self, widths: Sequence[str]) -> None:
        self._channels = len(widths)
        fields = [(str(index), WIDTHS[width]) for index, width in enumerate(widths)]
        self._form = np.dtype(fields)
        self._plain = all(width == "i32" for width in widths)

    def frame_bytes(self, rows: int) -> int:
        """Size of a frame of so many rows."""
        return HEADER.size + rows * self._form.itemsize

    def pack(self, frame: RowFrame) -> bytes:
        if self._plain:
            return frame.pack()
        samples = np.empty(len(frame.raw), dtype=self._form)
        for index in range(self._channels):
            samples[str(index)] = frame.raw[:, index]
        return frame.pack()[: HEADER.size] + samples.tobytes()

    def unpack(self, payload: bytes) -> RowFrame:
        """LinkDamage if the frame is not one of this bench."""
        if len(payload) < HEADER.size:
            raise LinkDamage(f"a row frame of {len(payload)} bytes is shorter than its header")
        sequence, tick, period, first_row, status, overruns, rows, channels = HEADER.unpack_from(payload)
        if channels != self._channels or rows == 0 or period == 0:
            raise LinkDamage(f"a row frame of {rows} rows, {channels} channels and a period of {period}")
        if len(payload) != self.frame_bytes(rows):
            raise LinkDamage(f"a row frame of {len(payload)} bytes cannot hold {rows} rows")
        samples = np.frombuffer(payload, dtype=self._form, offset=HEADER.size)
        raw = np.empty((rows, channels), dtype=np.int32)
        for index in range(channels):
            raw[:, index] = samples[str(index)]
        return RowFrame(sequence, tick, period, first_row, status, overruns, raw)
