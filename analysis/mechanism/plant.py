"""A mechanism that moves: the face of the simulated plant for a bench.

    plant = Plant(mechanism, disturbance, row_s=1e-3, theta_rad=mechanism.stop_low_rad)
    plant.drive(7.5, 0.5)            # the register ramps on the board, from the next row on
    plant.motor(COASTING)            # DRIVEN | COASTING (terminals open) | BRAKING (terminals shorted)
    plant.tap(1e-4, 0.01)            # a half-sine pulse that begins with the next row
    plant.hold(0.1); plant.let_go()  # a hand leads the body to an angle; then it is free, at rest
    rows = plant.advance(20)         # float64 (20, ROW_COLUMNS); row k is the state at its END

Columns OUT_* are exported here: body angle rad, crank angle rad (unwrapped), force shown by the load
cell N (resonance included, no noise), motor current A, terminal voltage V (open
terminals show the back EMF), carriage height m, winding degC, body rate rad/s, 1.0 where an end stop was
touched during the row, drive register V, tapper torque N m.
Commands take effect at the start of the next row. The result depends on the commands' rows and the seed,
never on how rows are grouped into calls.
"""

from __future__ import annotations

import numpy as np

from analysis.mechanism import equations as eq
from analysis.mechanism.disturbance import Disturbance
from analysis.mechanism.equations import (
    BRAKING,
    COASTING,
    DRIVEN,
    OUT_CELL,
    OUT_CONTACT,
    OUT_CRANK,
    OUT_CURRENT,
    OUT_DRIVE,
    OUT_HEIGHT,
    OUT_OMEGA,
    OUT_TAP,
    OUT_THETA,
    OUT_VOLTAGE,
    OUT_WINDING,
    ROW_COLUMNS,
)
from analysis.mechanism.packing import pack
from analysis.mechanism.parameters import Carriage, Mechanism

__all__ = [
    "BRAKING",
    "COASTING",
    "DRIVEN",
    "OUT_CELL",
    "OUT_CONTACT",
    "OUT_CRANK",
    "OUT_CURRENT",
    "OUT_DRIVE",
    "OUT_HEIGHT",
    "OUT_OMEGA",
    "OUT_TAP",
    "OUT_THETA",
    "OUT_VOLTAGE",
    "OUT_WINDING",
    "ROW_COLUMNS",
    "Plant",
    "warm_up",
]


class Plant:
    """One mechanism in time. `record` and `parameters` are the kernels' own arrays.

    Starts at rest with the carriage settled, the motor DRIVEN at 0 V.
    """

    def __init__(
        self,
        mechanism: Mechanism,
        disturbance: Disturbance | None = None,
        *,
        row_s: float = 1e-3,
        theta_rad: float | None = None,
        winding_deg_c: float = 25.0,
        housing_deg_c: float | None = None,
        energies: bool = False,
        always_fine: bool = False,
    ) -> None:
        if not row_s > 0.0:
            raise ValueError("the row period must be positive")
        self.parameters = pack(mechanism, disturbance, energies=energies, always_fine=always_fine)
        self.row_s = row_s
        record = np.zeros(eq.RECORD)
        record[eq.THETA] = mechanism.stop_low_rad if theta_rad is None else theta_rad
        record[eq.CELL] = mechanism.total_mass_kg * mechanism.gravity_m_per_s2
        record[eq.WINDING] = winding_deg_c
        # A motor that has stood for a while has one temperature.
        record[eq.HOUSING] = winding_deg_c if housing_deg_c is None else housing_deg_c
        record[eq.TAP_AGE] = -1.0
        if mechanism.carriage is Carriage.FLOATING and not mechanism.weight_preloaded:
            weight = mechanism.total_mass_kg * mechanism.gravity_m_per_s2
            record[eq.HEIGHT] = -weight / max(mechanism.carriage_stiffness_n_per_m, 1e-9)
        self.record = record

    def advance(self, rows: int, out: eq.Vector | None = None) -> eq.Vector:
        """Move on by `rows` rows; shape (rows, ROW_COLUMNS), into `out` if given."""
        if out is None:
            out = np.empty((rows, ROW_COLUMNS))
        eq.advance(self.record, self.parameters, self.row_s, out[:rows])
        return out[:rows]

    def motor(self, mode: int) -> None:
        """DRIVEN by the register, COASTING or BRAKING."""
        if mode not in (DRIVEN, COASTING, BRAKING):
            raise ValueError(f"no motor mode {mode}")
        self.record[eq.MOTOR] = mode

    def drive(self, target_v: float, slew_v_per_s: float) -> None:
        """Ramp the drive register towards `target_v`; it stays where it is with slew 0."""
        self.record[eq.TARGET_V] = target_v
        self.record[eq.SLEW] = abs(slew_v_per_s)

    def set_drive(self, volts: float) -> None:
        """Put the register at once: for switching off, where the motor mode has changed anyway."""
        self.record[eq.DRIVE_V] = self.record[eq.TARGET_V] = volts

    def tap(self, impulse_n_m_s: float, duration_s: float) -> None:
        """Begin a half-sine torque pulse with the next row; one that still runs is replaced."""
        if not duration_s > 0.0:
            raise ValueError("a tap needs a duration")
        self.record[eq.TAP_IMPULSE] = impulse_n_m_s
        self.record[eq.TAP_DURATION] = duration_s
        self.record[eq.TAP_AGE] = 0.0

    def hold(self, angle_rad: float) -> None:
        """A hand takes the body and leads it to `angle_rad`; at rest there within about 0.3 s."""
        self.record[eq.HELD] = 1.0
        self.record[eq.HOLD_ANGLE] = angle_rad

    def let_go(self) -> None:
        """The hand is gone; what is left of its speed is taken out."""
        if self.record[eq.HELD] > 0.0:
            self.record[eq.OMEGA] = 0.0
            self.record[eq.SLIDING] = 0.0
        self.record[eq.HELD] = 0.0

    @property
    def rows(self) -> int:
        """Rows advanced so far."""
        return int(self.record[eq.ROW])

    @property
    def flap_hz(self) -> float:
        """Crank rate at this instant."""
        return float(self.record[eq.RATE] / (2.0 * np.pi))

    @property
    def theta_rad(self) -> float:
        return float(self.record[eq.THETA])

    @property
    def drive_v(self) -> float:
        """The drive register."""
        return float(self.record[eq.DRIVE_V])

    @property
    def winding_deg_c(self) -> float:
        return float(self.record[eq.WINDING])


def warm_up(mechanism: Mechanism) -> None:
    """Compile (or load) the plant's kernel before anything is timed or armed."""
    Plant(mechanism).advance(1)
