"""A rig as the rest of the program sees it: channels, limits, drive, end stops, constants.

Pure data in SI units; `rig.files` reads it from a rig file and checks it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from analysis.mechanism.parameters import Mechanism
from drivers.contract import Halt
from drivers.text_lines import TextSampler


@dataclass(frozen=True)
class ChannelDescription:
    """One `[channel.NAME]` table.

    Encoders give `counts_per_turn`, converters give `scale` (SI per count). `polarity` is +1 or -1,
    `zero` is subtracted in SI units after scaling (value = polarity * raw * scale - zero).
    """

    name: str
    measures: str
    unit: str
    scale: float
    zero: float = 0.0
    polarity: int = 1
    counts_per_turn: int = 0
    index_pulse: bool = False
    delay_s: float = 0.0
    low_raw: int = -(2**31)
    high_raw: int = 2**31 - 1
    noise: float = 0.0  # white, SI unit, one sigma: used by the simulated sensor and by forecasts
    resonance_hz: float = 0.0  # of the mounted sensor, 0: not known
    resonance_damping: float = 0.0


@dataclass(frozen=True)
class Limits:
    """Bounds the interlocks watch on every row. The body's travel limits lie beyond the end stops."""

    current_a: float
    voltage_v: float
    winding_deg_c: float
    travel_low_rad: float
    travel_high_rad: float
    flap_hz: float
    slew_v_per_s: float
    load_n: float | None = None
    stale_s: float = 0.2
    loss_fraction: float = 0.01
    disk_reserve_bytes: float = 200e6
    stall_s: float = 0.5  # driven above stall_v without turning for so long
    stall_v: float = 1.5
    standstill_hz: float = 0.2


#: Trip causes and the halt each gets unless the rig file says otherwise.
DEFAULT_HALTS: Mapping[str, Halt] = {
    "current": Halt.COAST,
    "voltage": Halt.COAST,
    "winding": Halt.COAST,
    "travel": Halt.RAMP,
    "flap_rate": Halt.RAMP,
    "load": Halt.RAMP,
    "stale": Halt.COAST,
    "loss": Halt.RAMP,
    "disk": Halt.RAMP,
    "stall": Halt.COAST,
    "board": Halt.COAST,
    "refused": Halt.COAST,
    "operator": Halt.COAST,
}


@dataclass(frozen=True)
class MotorDescription:
    """What the winding model needs. The model never reads a simulated plant's true temperature."""

    resistance_ohm: float  # at 25 degC
    winding_capacity_j_per_k: float
    housing_capacity_j_per_k: float
    winding_housing_k_per_w: float
    housing_ambient_k_per_w: float
    copper_coefficient_per_k: float = 0.003854
    ambient_deg_c: float = 25.0
    start_deg_c: float | None = None  # None: taken as hot, see rig.run.winding


@dataclass(frozen=True)
class StopDescription:
    """Angles at which the body touches its end stops."""

    low_rad: float
    high_rad: float


@dataclass(frozen=True)
class SimulatedWorld:
    """What a simulated bench adds to the mechanism: disturbances, sensor faults, unmodelled effects."""

    seed: int = 1
    body_torque_rms_rad: float = 3.4907e-4  # ambient rms of the slow mode at 1.2 x boundary (0.02 deg)
    body_torque_noise_n_m_per_rt_hz: float | None = None  # explicit two-sided density, overrides the above
    winding_start_deg_c: float = 25.0
    ambient_deg_c: float = 25.0
    tap_duration_s: float = 0.01
    tap_scatter: float = 0.2  # relative sd of the tapper's impulse
    hinge_sticking_n_m: float = 0.0  # Coulomb friction that really sticks
    load_drift_n_per_rt_s: float = 0.0
    clock_error_ppm: float = 0.0
    lost_frame_probability: float = 0.0
    backlash_rad: float = 0.0  # crank to wing gear
    base_stiffness_n_per_m: float = 0.0  # 0: rigid base
    base_mass_kg: float = 0.0
    base_damping_n_s_per_m: float = 0.0
    off_axis_shake: float = 0.0  # horizontal over vertical shake
    wing_bending: float = 0.0  # relative loss of lift per (flap rate / 40 Hz)^2


@dataclass(frozen=True)
class RigDescription:
    """Everything one rig file says. `constant_std` holds the standard uncertainty of mechanism
    constants by field name; `unknown` the names the file marks as not known (theory then says
    "not testable")."""

    name: str
    title: str
    driver: str  # "simulated", "board", or "none" for analysis only
    sample_hz: float
    frame_rows: int
    tick_hz: int
    channels: tuple[ChannelDescription, ...]
    limits: Limits
    halts: Mapping[str, Halt]
    motor: MotorDescription | None
    stops: StopDescription
    mechanism: Mechanism | None
    constant_std: Mapping[str, float] = field(default_factory=dict)
    unknown: tuple[str, ...] = ()
    world: SimulatedWorld | None = None
    context: Mapping[str, str] = field(default_factory=dict)  # operator, specimen, air ... as written
    tapper: bool = True
    releaser: bool = True
    sync_line: bool = True
    port: str = ""  # of a board: a device, or socket://HOST:PORT
    baud: int = 1_000_000
    samplers: tuple[TextSampler, ...] = ()  # beside the board; never for interlocks or decay
    sha256: str = ""  # of the file text
    text: str = ""  # the file as read

    @property
    def simulated(self) -> bool:
        return self.driver == "simulated"
