"""What surrounds the simulated mechanism: disturbances, sensors and the board, as plain data."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class World:
    """Disturbances, sensor faults and effects that the theory does not know.

    `body_torque_rms_rad` sizes the white body torque by the rms it gives the slow mode at 1.2 x the
    averaged boundary; `body_torque_noise_n_m_per_rt_hz`, if given, is its two-sided density instead.
    """

    seed: int = 1
    body_torque_rms_rad: float = 3.4907e-4
    body_torque_noise_n_m_per_rt_hz: float | None = None
    winding_start_deg_c: float = 25.0
    ambient_deg_c: float = 25.0
    tap_duration_s: float = 0.01
    tap_scatter: float = 0.2  # relative standard deviation of the tapper's impulse
    hinge_sticking_n_m: float = 0.0
    load_drift_n_per_rt_s: float = 0.0  # random walk of the load cell's zero
    clock_error_ppm: float = 0.0  # positive: the board's clock runs fast
    lost_frame_probability: float = 0.0
    backlash_rad: float = 0.0
    base_stiffness_n_per_m: float = 0.0
    base_mass_kg: float = 0.0
    base_damping_n_s_per_m: float = 0.0
    off_axis_shake: float = 0.0
    wing_bending: float = 0.0


@dataclass(frozen=True)
class SensorFacts:
    """What a sensor does to its quantity, beyond the scale in its `Channel`.

    noise              white, one sigma, in the channel's SI unit, before the converter's step
    counts_per_turn    > 0: an incremental encoder, whose count wraps as int32 and never saturates
    index_pulse        the board checks the count once per turn and tells if it slipped
    resonance_hz       > 0: the mounted load cell rings there (only for a vertical load)
    """

    noise: float = 0.0
    counts_per_turn: int = 0
    index_pulse: bool = False
    resonance_hz: float = 0.0
    resonance_damping: float = 0.0


@dataclass(frozen=True)
class BoardFacts:
    """How the board samples and protects; its own trips need no host.

    The board takes the crank as turning until it has not gone a twentieth of a turn for as long as that
    takes at a quarter of `standstill_hz`: a crank that hangs at its top for a moment is not at rest.
    """

    row_hz: float = 1000.0
    frame_rows: int = 20
    tick_hz: int = 1_000_000
    boot_tick: int = 0
    heartbeat_timeout_s: float = 0.2
    max_voltage_v: float = 60.0
    stall_v: float = 1.5
    stall_s: float = 0.5
    standstill_hz: float = 0.2
    current_trip_a: float = 30.0  # a last resort against a short; the rig's limit is the interlocks'
    release_hold_s: float = 0.5  # the releaser keeps the body at rest this long before letting go
    tapper: bool = True
    sync: bool = True
    releaser: bool = True

    def __post_init__(self) -> None:
        period = self.tick_hz / self.row_hz
        if abs(period - round(period)) > 1e-9 or period < 1:
            raise ValueError(f"{self.row_hz:g} rows a second do not fit a clock of {self.tick_hz} ticks")
        if not 1 <= self.frame_rows <= 255:
            raise ValueError(f"a frame holds 1 to 255 rows, not {self.frame_rows}")

    @property
    def row_period_ticks(self) -> int:
        return round(self.tick_hz / self.row_hz)

    def rows(self, duration_s: float) -> int:
        """Whole rows that last at least `duration_s` of board time."""
        ticks = round(duration_s * self.tick_hz)
        return -(-ticks // self.row_period_ticks)
