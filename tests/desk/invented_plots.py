"""Signals, taps and maps that are known functions, for the plots to draw."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPoint
from PySide6.QtWidgets import QWidget

from drivers.rows import RowBlock
from rig.bench.ring import RingWriter
from rig.bench_source import channel_table
from rig.description import ChannelDescription, RigDescription
from rig.files.rig import read_rig
from rig.session import Stream
from rig.shipped import find

TICK_HZ, ROW_TICKS = 1_000_000, 1000
FLAP_HZ = 30.0
COUNTS = 2048  # of the crank, per turn
MIDDLE_RAD, RIPPLE_RAD = 0.2, 0.03
_number = itertools.count()


def rig() -> RigDescription:
    """A body whose raw values count backwards, a crank, load, current, voltage."""

    def channel(name: str, measures: str, unit: str, scale: float, **more: Any) -> ChannelDescription:
        return ChannelDescription(name, measures, unit, scale, **more)

    return replace(
        read_rig(find("boom")),
        channels=(
            channel("body", "body angle", "rad", 1e-5, polarity=-1, zero=0.01),
            channel("crank", "crank angle", "rad", 0.0, counts_per_turn=COUNTS),
            channel("load", "vertical load", "N", 0.001),
            channel("current", "motor current", "A", 0.001),
            channel("voltage", "motor voltage", "V", 0.001),
            channel("room", "temperature", "degC", 0.01),
        ),
    )


def rows(count: int, first: int = 0) -> NDArray[np.int32]:
    """Raw values of rows from `first` on, (count, 6): a body that only ripples with the flapping."""
    time_s = (first + np.arange(count)) * ROW_TICKS / TICK_HZ
    turn = 2.0 * np.pi * FLAP_HZ * time_s
    body = MIDDLE_RAD + RIPPLE_RAD * np.sin(turn)
    made = np.zeros((count, 6))
    made[:, 0] = -(body + 0.01) / 1e-5
    made[:, 1] = COUNTS * FLAP_HZ * time_s
    made[:, 2] = 1000.0 * np.cos(turn)
    made[:, 3] = 500.0 + 100.0 * np.sin(2.0 * turn)
    made[:, 4] = 8000.0
    return np.round(made).astype(np.int32)


def block(count: int, first: int = 0, lost: int = 0) -> RowBlock:
    tick = (np.uint64(7000) + (first + np.arange(count)).astype(np.uint64)) * np.uint64(ROW_TICKS)
    return RowBlock(tick, rows(count, first), 0, 1, lost_rows=lost)


def ring(path: Path, rows_per_bin: int = 1, bins: int = 8192) -> RingWriter:
    return RingWriter(path, [one.name for one in rig().channels], TICK_HZ, rows_per_bin, bins)


def stream(count: int, lost: tuple[int, int] | None = None) -> Stream:
    """A stream of so many rows in memory; `lost` is (row before which, rows) are missing."""
    file = h5py.File(f"invented-{next(_number)}.h5", "w", driver="core", backing_store=False)
    group = file.create_group("streams/board")
    group.attrs.update({"tick_hz": TICK_HZ, "row_period_ticks": ROW_TICKS, "frame_rows": 20})
    number = np.arange(count)
    if lost is not None:
        number[lost[0] :] += lost[1]
    tick = ((7000 + number) * ROW_TICKS).astype(np.uint64)
    raw = np.vstack([rows(1, int(first)) for first in number]) if lost is not None else rows(count)
    group["tick"], group["status"] = tick, np.zeros(count, np.uint16)
    group["time_s"] = (tick - tick[0]) / TICK_HZ
    for column, channel in enumerate(channel_table(rig())):
        data = group.create_dataset(channel.name, data=raw[:, column])
        for name in ("measures", "unit", "scale", "offset", "delay_s", "low_raw", "high_raw", "calibration"):
            data.attrs[name] = getattr(channel, name)
        data.attrs["column"] = column
    losses = () if lost is None else ((int(tick[lost[0]]), lost[1], 0, 0),)
    return Stream(group, Path("invented.h5"), losses)


def boxes(view: QWidget, parts: Sequence[QWidget]) -> list[tuple[float, float, float, float]]:
    """Left, top, width and height of parts in a view's coordinates."""
    found = []
    for part in parts:
        corner = part.mapTo(view, QPoint(0, 0))
        found.append((float(corner.x()), float(corner.y()), float(part.width()), float(part.height())))
    return found


def measured(value: float | None, half: float | None = None) -> dict[str, float | None]:
    if value is None or half is None:
        return {"value": value, "std": None, "low": None, "high": None}
    return {"value": value, "std": half / 1.959964, "low": value - half, "high": value + half}


def tap_picture(tap: int, *, fitted: bool = True, **result: Any) -> dict[str, Any]:
    """The picture of a tap, as the analysis tells it."""
    time_s = np.linspace(-0.6, 3.0, 300)
    swing = np.where(time_s > 0.0, 2.0 * np.exp(-0.8 * time_s) * np.sin(8.0 * time_s), 0.0)
    inside = time_s[time_s > 0.05]
    told = {
        "tap": tap,
        "level": 0,
        "tick": 1,
        "returned": fitted,
        "accepted": fitted,
        "reason": "returned" if fitted else "reached the lower end stop",
        "status": "ok" if fitted else "lost",
        "decay_per_s": measured(0.8, 0.02) if fitted else measured(None),
        "mode_hz": measured(1.25, 0.003) if fitted else measured(None),
    }
    return {
        "tap": told | result,
        "time_s": time_s.tolist(),
        "low_deg": (10.0 + swing - 1.0).tolist(),
        "high_deg": (10.0 + swing + 1.0).tolist(),
        "mean_time_s": time_s[::10].tolist(),
        "mean_deg": (10.0 + swing[::10]).tolist(),
        "model_time_s": inside.tolist() if fitted else [],
        "model_deg": (10.0 + swing[time_s > 0.05]).tolist() if fitted else [],
        "residual_deg": (0.1 * np.sin(40.0 * inside)).tolist() if fitted else [],
        "from_s": 0.05 if fitted else None,
        "to_s": 2.9 if fitted else None,
    }


def level(direction: str, drive_v: float, flap_hz: float, stiffness: float | None, **more: Any) -> dict:
    """A row of the level table, as the analysis tells it."""
    return {
        "direction": direction,
        "drive_v": measured(drive_v + 0.002, 0.001),  # as measured: not quite what was asked for
        "flap_hz": measured(flap_hz, 0.1),
        "stiffness_per_s2": measured(stiffness, None if stiffness is None else 4.0),
        "decay_per_s": measured(None if stiffness is None else 0.8, 0.02),
        "taps": 2,
        "returned": 2,
        "regime": "stable" if stiffness is not None else "unstable",
        "state": "held" if stiffness is not None else "bouncing",
        "start_s": None,
        "role": "level",
    } | more


def boundary(flap_hz: float, half: float) -> dict[str, Any]:
    return {"kind": "divergence", "flap_hz": measured(flap_hz, half), "reason": ""}


NO_BOUNDARY = {"kind": "not_located"}
