"""Random numbers that depend on the seed and on how many were drawn, not on how they were asked for."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

#: Independent streams of one seed, so that a tap more does not change the noise of a sensor.
SENSORS, TAPS, FRAMES, PLANT = range(4)


def stream(seed: int, purpose: int) -> np.random.Generator:
    """The generator of one purpose; the same for the same seed, on every machine."""
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, purpose])))


class NormalRows:
    """Standard normal numbers in rows of `width`, drawn in large chunks because that is cheap."""

    def __init__(self, generator: np.random.Generator, width: int, chunk: int = 2048) -> None:
        self._generator = generator
        self._chunk = np.empty((chunk, width))
        self._next = chunk

    def take(self, rows: int) -> NDArray[np.float64]:
        """The next `rows` rows, shape (rows, width); valid until the next call."""
        start, size = self._next, len(self._chunk)
        if start + rows <= size:
            self._next = start + rows
            return self._chunk[start : start + rows]
        parts = [self._chunk[start:].copy()]
        missing = rows - len(parts[0])
        while missing > 0:
            self._generator.standard_normal(out=self._chunk)
            self._next = min(missing, size)
            parts.append(self._chunk[: self._next].copy())
            missing -= self._next
        return np.concatenate(parts)
