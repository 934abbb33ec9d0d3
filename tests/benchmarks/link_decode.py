"""How many messages a second the link's reader takes, and what a row frame costs from bytes to placed rows.

    python tests/benchmarks/link_decode.py [--write]

Row frames of 7 rows of 4 channels, 112 bytes and a zero on the wire, fed in blocks of 64 kB, as a serial port is
read. Beside it a decoder in plain Python (byte stuffing by slices, both check sums by table), and the calibration
kernel (`calibration.py`), all in turns: a shared machine changes its speed from second to second, the ratios stay.
`--write` keeps the result beside this file.
"""

from __future__ import annotations

import json
import statistics
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
from calibration import kernel_seconds

from drivers.link import messages as ms
from drivers.link.framing import Unwrapper, wrap
from drivers.link.rowcoding import RowCoding
from drivers.rows import FrameSequence, RowFrame

ROUNDS = 15
BLOCK = 1 << 16
FRAMES = 40_000  # a round; the plain decoder takes a twentieth of them
WIDTHS = ("i32", "i32", "i16", "i16")
ROWS = 7


# The plain decoder


def _table16() -> list[int]:
    table = []
    for register in range(0, 65536, 256):
        for _ in range(8):
            register = register << 1 ^ (0x1021 if register & 0x8000 else 0)
        table.append(register & 0xFFFF)
    return table


def _table32() -> list[int]:
    table = []
    for register in range(256):
        for _ in range(8):
            register = register >> 1 ^ (0xEDB88320 if register & 1 else 0)
        table.append(register)
    return table


TABLE16, TABLE32 = _table16(), _table32()


def plain_messages(data: bytes) -> Iterator[bytes]:
    """The messages in `data`, which ends with a zero."""
    for piece in data.split(b"\0")[:-1]:
        out = bytearray()
        at, size = 0, len(piece)
        while at < size:
            code = piece[at]
            out += piece[at + 1 : at + code]
            at += code
            if code < 255 and at < size:
                out.append(0)
        register16, register32 = 0xFFFF, 0xFFFFFFFF
        for byte in out[:-4]:
            register16 = register16 << 8 & 0xFFFF ^ TABLE16[register16 >> 8 ^ byte]
            register32 = register32 >> 8 ^ TABLE32[register32 & 0xFF ^ byte]
        check = register16 << 16 | (register32 ^ 0xFFFF) & 0xFFFF
        if at == size and check == int.from_bytes(out[-4:], "big"):
            yield bytes(out[:-4])


def frames(count: int) -> list[bytes]:
    rng = np.random.default_rng(1)
    coding = RowCoding(WIDTHS)
    wired = []
    for index in range(count):
        raw = rng.integers(-30_000, 30_000, (ROWS, 4)).astype(np.int32)
        frame = RowFrame(index, index * ROWS * 1000 & 0xFFFFFFFF, 1000, index * ROWS, 1, 0, raw)
        wired.append(wrap(ms.pack(ms.Rows(coding.pack(frame)))))
    return wired


def seconds(work: Callable[[], int], expected: int) -> float:
    start = time.perf_counter()
    done = work()
    took = time.perf_counter() - start
    if done != expected:
        raise SystemExit(f"{done} messages decoded, expected {expected}")
    return took


def fast(data: bytes) -> int:
    unwrapper = Unwrapper()
    return sum(len(unwrapper.feed(data[at : at + BLOCK])) for at in range(0, len(data), BLOCK))


def rows(messages: list[bytes]) -> int:
    """Checked messages to rows placed in time, as the board driver does it."""
    coding, placed = RowCoding(WIDTHS), FrameSequence()
    count = 0
    for checked in messages:
        message = ms.unpack(checked)
        if isinstance(message, ms.Rows):
            count += len(placed.place(coding.unpack(message.payload))) > 0
    return count


def main() -> None:
    wired = frames(FRAMES)
    stream = b"".join(wired)
    few = b"".join(wired[: FRAMES // 20])
    messages = Unwrapper().feed(stream)
    if list(plain_messages(few)) != messages[: FRAMES // 20]:
        raise SystemExit("the two decoders do not agree")
    speeds, plain_speeds, ratios, units, row_us, row_units = [], [], [], [], [], []
    for _ in range(ROUNDS):
        unit = kernel_seconds()
        took = seconds(lambda: fast(stream), FRAMES) / FRAMES
        plain = seconds(lambda: sum(1 for _ in plain_messages(few)), FRAMES // 20) / (FRAMES // 20)
        placed = seconds(lambda: rows(messages[: FRAMES // 4]), FRAMES // 4) / (FRAMES // 4)
        unit = 0.5 * (unit + kernel_seconds())
        speeds.append(1.0 / took)
        plain_speeds.append(1.0 / plain)
        ratios.append(plain / took)
        units.append(1e6 * took / unit)
        row_us.append(1e6 * placed)
        row_units.append(1e6 * placed / unit)
    median = statistics.median
    result = {
        "bytes_on_the_wire": statistics.fmean(map(len, wired)),
        "frames_per_s": round(median(speeds)),
        "frames_per_s_best": round(max(speeds)),
        "plain_python_frames_per_s": round(median(plain_speeds)),
        "ratio": round(median(ratios), 1),
        "ratio_least": round(min(ratios), 1),
        "calibration_units_per_million_frames": round(median(units), 1),
        "rows_us_per_frame": round(median(row_us), 1),
        "rows_calibration_units_per_million_frames": round(median(row_units), 1),
    }
    print(
        f"{result['bytes_on_the_wire']:.1f} bytes a frame: {median(speeds):,.0f} frames/s (best {max(speeds):,.0f}), "
        f"plain Python {median(plain_speeds):,.0f}: {median(ratios):.1f} times (least {min(ratios):.1f})\n"
        f"{median(units):.1f} calibration units for a million frames\n"
        f"unpacked, coded to int32 and placed in time: {median(row_us):.1f} us a frame of {ROWS} rows, "
        f"{median(row_units):.0f} calibration units for a million"
    )
    if "--write" in sys.argv:
        place = Path(__file__).with_suffix(".json")
        place.write_text(json.dumps({"rounds": ROUNDS, "results": result}, indent=2) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
