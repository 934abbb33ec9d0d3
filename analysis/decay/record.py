"""One stretch of body angle to be fitted, checked and brought into local time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]
TWO_PI = 2.0 * np.pi


@dataclass(frozen=True)
class TapRecord:
    """Body angle after one tap: times in s, angle in rad, crank phase in rad (None: no crank encoder)."""

    time_s: FloatArray
    angle_rad: FloatArray
    crank_rad: FloatArray | None = None


def checked(
    time_s: ArrayLike, angle_rad: ArrayLike, crank_rad: ArrayLike | None, what: str = "record"
) -> TapRecord:
    """Arrays as float64, times from 0. ValueError: unequal lengths, times not increasing, values not finite."""
    time = np.asarray(time_s, dtype=np.float64)
    angle = np.asarray(angle_rad, dtype=np.float64)
    crank = None if crank_rad is None else np.asarray(crank_rad, dtype=np.float64)
    if time.ndim != 1 or time.shape != angle.shape or (crank is not None and crank.shape != time.shape):
        raise ValueError(f"{what}: time, angle and crank must be one-dimensional and of equal length")
    arrays = [time, angle] if crank is None else [time, angle, crank]
    if not all(np.all(np.isfinite(array)) for array in arrays):
        raise ValueError(f"{what}: times, angles and crank phases must be finite")
    if len(time) > 1 and np.any(np.diff(time) <= 0.0):
        raise ValueError(f"{what}: times must increase")
    if crank is not None and len(crank) > 2:
        from analysis.flap import unwrap_crank

        crank = unwrap_crank(time, crank)
    return TapRecord(time - time[0] if len(time) else time, angle, crank)


def nuisance_rows(record: TapRecord, harmonics: int = 2) -> FloatArray:
    """Rows (k, n) the mode must not be blamed for: offset, drift, cos and sin of crank harmonics."""
    time = record.time_s
    rows = [np.ones_like(time), time - time.mean()]
    if record.crank_rad is not None:
        for order in range(1, harmonics + 1):
            rows += [np.cos(order * record.crank_rad), np.sin(order * record.crank_rad)]
    return np.array(rows)


def orthonormal(rows: FloatArray) -> FloatArray:
    """Orthonormal rows spanning the same space; dependent rows are left out."""
    scaled = rows / np.maximum(np.linalg.norm(rows, axis=1, keepdims=True), 1e-300)
    q, r = np.linalg.qr(scaled.T)
    keep = np.abs(np.diag(r)) > 1e-9
    return np.ascontiguousarray(q.T[keep])


@dataclass(frozen=True)
class Blocks:
    """Block means of a record: averaging is linear, so model rows averaged alike still fit exactly."""

    time_s: FloatArray  # centres
    count: FloatArray  # samples in each block
    starts: NDArray[np.intp]
    stop: int  # samples used; a stub at the end, far noisier than the rest, is left out

    def mean(self, values: FloatArray) -> FloatArray:
        """Block means along the last axis."""
        return np.ascontiguousarray(
            np.add.reduceat(values[..., : self.stop], self.starts, axis=-1) / self.count
        )


def blocks_of(time: FloatArray, rate_hz: float = 60.0) -> Blocks:
    """Blocks of equal duration at about `rate_hz`; empty ones (lost rows) are left out."""
    step = float(np.median(np.diff(time)))
    size = max(1, round(1.0 / (rate_hz * step)))
    index = np.floor((time - time[0]) / (size * step) + 0.25 / size).astype(np.int64)
    edges = np.concatenate(([0], np.flatnonzero(np.diff(index) > 0) + 1, [len(time)])).astype(np.intp)
    if len(edges) > 2 and edges[-1] - edges[-2] < size:
        edges = edges[:-1]
    count = np.diff(edges).astype(float)
    centres = np.add.reduceat(time[: edges[-1]], edges[:-1]) / count
    return Blocks(centres, count, edges[:-1], int(edges[-1]))


def quiet_record(quiet: TapRecord | Sequence[ArrayLike | None] | None) -> TapRecord | None:
    """The undisturbed record before a tap, from (time_s, angle_rad, crank_rad)."""
    if quiet is None or isinstance(quiet, TapRecord):
        if quiet is None:
            return None
        return checked(quiet.time_s, quiet.angle_rad, quiet.crank_rad, "quiet record")
    if len(quiet) not in (2, 3) or quiet[0] is None or quiet[1] is None:
        raise ValueError("quiet must be (time_s, angle_rad, crank_rad)")
    return checked(quiet[0], quiet[1], quiet[2] if len(quiet) == 3 else None, "quiet record")
