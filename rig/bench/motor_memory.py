"""A motor's temperature from one run to the next: a motor run hot a minute ago is still hot.

The file is taken away when a run begins and written at its end. After a run that was killed there is none, and a
motor without history is taken as hot.
"""

from __future__ import annotations

import sys
from pathlib import Path

from rig.description import RigDescription
from rig.run.winding import WindingModel, read_state


class MotorMemory:
    """The winding model of a real motor; `winding` is None for rigs without one or simulated in process."""

    def __init__(self, rig: RigDescription, folder: str, utc_s: float) -> None:
        self._utc_s = utc_s
        self._path = Path(folder) / f"winding-{rig.name}.json" if folder else None
        self.winding: WindingModel | None = None
        if rig.motor is None or rig.simulated:
            return
        self.winding = WindingModel(rig.motor, rig.limits.winding_deg_c)
        if self._path is None:
            return
        left = read_state(self._path)
        try:
            self._path.unlink(missing_ok=True)
        except OSError as error:
            # It could not be told from a fresh one after a crash.
            print(f"haltere: {self._path} is not used: {error.strerror}", file=sys.stderr)
            self._path = None
            return
        if left is not None:
            self.winding.resume(left, utc_s)

    def keep(self, elapsed_s: float) -> None:
        """Write down how hot the motor was `elapsed_s` after the run began."""
        if self.winding is None or self._path is None:
            return
        try:
            self.winding.state(self._utc_s + elapsed_s).write(self._path)
        except OSError as error:
            print(f"haltere: {self._path} cannot be written: {error.strerror}", file=sys.stderr)
