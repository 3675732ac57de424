"""A mission as checked data: units as the names say, derived quantities as properties.

Nothing here reads files or checks ranges (see `load` and `schema`); nothing here makes integers (see `scaling`).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import datetime

Vector = tuple[float, float, float]
Matrix = tuple[Vector, Vector, Vector]

AXES = ("x", "y", "z")
COPPER_PER_K = 0.00393
"""Temperature coefficient of the resistance of annealed copper at 20 °C, 1/K (IEC 60028, from memory)."""


@dataclass(frozen=True)
class Body:
    """Rigid body. Frame: body axes, origin at the centre of mass."""

    inertia_kg_m2: Matrix
    tip_off_deg_s: Vector
    residual_dipole_a_m2: Vector
    drag_force_n: float
    pressure_centre_m: Vector


@dataclass(frozen=True)
class Orbit:
    """Either two-line elements, or a circular orbit at an epoch. Unused keys are None."""

    epoch_utc: datetime | None
    altitude_km: float | None
    inclination_deg: float | None
    node_deg: float | None
    argument_of_latitude_deg: float | None
    two_line_elements: tuple[str, str] | None


@dataclass(frozen=True)
class Supply:
    """Voltage of the supply that drives the coils."""

    min_v: float
    nominal_v: float
    max_v: float


@dataclass(frozen=True)
class Winding:
    """What the dipole of a coil follows from when it is not given."""

    turns: int
    area_m2: float
    resistance_ohm: float
    resistance_temperature_c: float
    temperature_c: float

    def dipole_a_m2(self, supply_v: float) -> float:
        """Turns × area × current, the current from copper's resistance at `temperature_c`."""
        warm = 1.0 + COPPER_PER_K * (self.temperature_c - 20.0)
        warm /= 1.0 + COPPER_PER_K * (self.resistance_temperature_c - 20.0)
        return self.turns * self.area_m2 * supply_v / (self.resistance_ohm * warm)


@dataclass(frozen=True)
class Coil:
    """One torquer along a body axis."""

    core: str  # "cored" or "air"
    dipole_a_m2: float  # full dipole at the nominal supply voltage, both of a pair together
    winding: Winding | None
    mirrored_pair: bool
    time_constant_ms: float
    remanence_fraction: float
    polarity: int
    blanking_ms: float  # least age of its switch-off at the start of a sample


@dataclass(frozen=True)
class Magnetometer:
    """Three-axis magnetometer."""

    counts_per_ut: float
    range_ut: float
    noise_nt: float
    bias_ut: Vector
    bias_error_ut: Vector
    misalignment_deg: Vector
    misalignment_error_deg: Vector
    stray_ut_per_a_m2: Matrix


@dataclass(frozen=True)
class Gyro:
    """Three-axis gyro."""

    counts_per_deg_s: float
    range_deg_s: float
    noise_deg_s: float
    bias_deg_s: Vector
    bias_error_deg_s: Vector
    misalignment_deg: Vector
    misalignment_error_deg: Vector


@dataclass(frozen=True)
class Cycle:
    """The timeline of one control cycle: blanking, sample, compute delay, drive window."""

    period_ms: float
    blanking_ms: float
    sample_ms: float
    compute_delay_ms: float
    drive_window_ms: float
    pulse_tick_us: int
    shortest_pulse_ms: float
    timing_tolerance_ms: float


@dataclass(frozen=True)
class Control:
    """The law and its thresholds. Exactly one of the three gain fields is set."""

    law: str  # "derivative" or "rate"
    k_am2_s_per_t: float | None
    K_n_m_s: float | None
    gain: str | None  # "auto"
    gain_scaling: str  # "constant" or "normalised"
    saturation: str  # "per-axis" or "keep-direction"
    low_pass_s: float
    settle_by: str  # "gyro" or "field"
    settled_deg_s: float
    wake_deg_s: float
    dwell_s: float  # default: a quarter of an orbit
    wake_dwell_s: float
    hold_off_s: int
    field_min_ut: float
    field_max_ut: float
    bench_limit_ms: float
    bench_key: int


@dataclass(frozen=True)
class Defence:
    """Thresholds of the checks on board. Of a length in time or a rate error, 0 switches the check off."""

    jump_ut: float
    noise_ut: float
    frozen_s: float
    dead_axis_s: float
    gyro_frozen_s: float
    gyro_error_deg_s: float
    divergence_guard: bool
    guard_deg_s: float
    window_s: float
    pause_s: float
    growth_percent: float
    progress_percent: float
    retries: int


@dataclass(frozen=True)
class CurrentSense:
    """Signed readings of each coil's current: at the end of its pulse, and while the magnetometer samples."""

    counts_at_full: int  # at the full current of the nominal supply voltage, every coil
    noise_counts: float
    off_counts: int
    weak_percent: float


@dataclass(frozen=True)
class Mission:
    """Everything the mission file says, checked, with its defaults filled in."""

    name: str
    body: Body
    orbit: Orbit
    supply: Supply
    coil: tuple[Coil, Coil, Coil]
    magnetometer: Magnetometer
    gyro: Gyro | None
    cycle: Cycle
    control: Control
    defence: Defence
    current_sense: CurrentSense | None
    source: str  # path of the file, for messages
    digest: str  # SHA-256 of the file's bytes and of what was laid over it, first 12 hex digits

    @property
    def tip_off_rad_s(self) -> float:
        """‖ω‖ at tip-off, rad/s."""
        return math.radians(math.hypot(*self.body.tip_off_deg_s))
