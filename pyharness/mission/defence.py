"""What a healthy spacecraft does at most: the least legal thresholds of the defences, and their defaults.

A default leaves room above the least legal value for what the sensors add. Values and paths are those of the mission
file.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

from pyharness.mission.model import AXES
from pyharness.mission.schema import ORBITAL_PERIOD

FAST = 1.5
"""A tumble up to this many times the tip-off rate is no jump."""
GUARD = 1.1
"""Growth beyond this many times the tip-off rate is the law's own doing."""
MOVED_COUNTS = 10
"""Counts by which a healthy field must have moved before one that stands still is called frozen."""
FEWEST_CYCLES, MOST_CYCLES = 4, 65_535
COMPARED_RAD = 0.5
"""Turn in a period up to which gyro and field are compared."""
PULSE_TIME_CONSTANTS = 3.0
"""Pulses of at least this many L/R are judged by their current."""

_SIX_SIGMA = 6.0 * math.sqrt(2.0)
"""Six standard deviations of the difference of two samples."""
_WIDEST_UT = 1000.0

Values = Mapping[str, object]


def turned_ut(tip_off_deg_s: tuple[float, ...], period_ms: float, field_ut: float) -> float:
    """Change of a field from sample to sample in the fastest tumble, µT.

    The chord 2 B sin(ωT/2), and 2 B from half a turn on.
    """
    half_turn = 0.5 * FAST * math.radians(math.hypot(*tip_off_deg_s)) * period_ms * 1e-3
    return 2.0 * field_ut * math.sin(min(half_turn, math.pi / 2.0))


def sample_noise_ut(noise_nt: float) -> float:
    """Six standard deviations of the difference of two samples, µT."""
    return _SIX_SIGMA * noise_nt * 1e-3


def rate_noise_deg_s(noise_nt: float, period_ms: float, field_min_ut: float, field_max_ut: float) -> float:
    """Rate noise of a two-sample derivative, √2 σ / (B T), in a field halfway between the plausible ones, °/s."""
    middle_ut = 0.5 * (field_min_ut + field_max_ut)
    return math.degrees(math.sqrt(2.0) * noise_nt * 1e-3 / (middle_ut * period_ms * 1e-3))


def fewest_still_cycles(orbit_s: float, field_min_ut: float, counts_per_ut: float, period_ms: float) -> int:
    """Cycles in which the weakest field, turning at the orbital rate, moves by `MOVED_COUNTS`."""
    counts_a_cycle = 2.0 * math.pi / orbit_s * field_min_ut * counts_per_ut * period_ms * 1e-3
    return max(FEWEST_CYCLES, math.ceil(MOVED_COUNTS / counts_a_cycle))


def pulse_share() -> float:
    """Share of its full current that the shortest judged pulse reaches at least: 1 − exp(−3)."""
    return -math.expm1(-PULSE_TIME_CONSTANTS)


def jump_default_ut(v: Values) -> float:
    """What may lie between two samples of a healthy sensor, µT. A bias stands still in the body: no change."""
    turned = turned_ut(v["body.tip_off_deg_s"], v["cycle.period_ms"], v["control.field_max_ut"])
    return _up(min(_WIDEST_UT, turned + _disturbed_ut(v)), 2)


def noise_default_ut(v: Values) -> float:
    """What may lie between the norms of two samples, µT. A bias error turns against the field: a change."""
    return _up(min(_WIDEST_UT, 2.0 * math.hypot(*v["magnetometer.bias_error_ut"]) + _disturbed_ut(v)), 3)


def _disturbed_ut(v: Values) -> float:
    """Noise, what the coils leave behind (with either sign), the way along the orbit, and rounding to counts, µT."""
    orbital_rad_s = 2.0 * math.pi / v[ORBITAL_PERIOD]
    along_orbit = 3.0 * orbital_rad_s * v["control.field_max_ut"] * v["cycle.period_ms"] * 1e-3
    left = sum(_left_by_coil_ut(v, axis) for axis in range(3))
    rounding = 2.0 / v["magnetometer.counts_per_ut"]
    return sample_noise_ut(v["magnetometer.noise_nt"]) + 2.0 * left + along_orbit + rounding


def _left_by_coil_ut(v: Values, axis: int) -> float:
    """Field of what a coil leaves after its blanking, remanence and the rest of the current, µT."""
    coil = f"coil.{AXES[axis]}"
    left = v[f"{coil}.remanence_fraction"] + math.exp(-v[f"{coil}.blanking_ms"] / v[f"{coil}.time_constant_ms"])
    full = v[f"{coil}.dipole_a_m2"] * v["supply.max_v"] / v["supply.nominal_v"]
    return left * full * math.hypot(*(row[axis] for row in v["magnetometer.stray_ut_per_a_m2"]))


def frozen_default_s(v: Values) -> float:
    """Just long enough; 0, for off, if a counter of 16 bits is too short for that."""
    cycles = fewest_still_cycles(
        v[ORBITAL_PERIOD], v["control.field_min_ut"], v["magnetometer.counts_per_ut"], v["cycle.period_ms"]
    )
    return _seconds(cycles, v) if cycles <= MOST_CYCLES else 0.0


def dead_axis_default_s(v: Values) -> float:
    """8 × as long as for all axes.

    Near its extremum a component of C counts stands still: C (1 − cos φ) ≤ 1 for φ = ±√(2/C). Without noise that moves the
    counts, at least twice the time that this takes at the orbital rate.
    """
    cycles = 8.0 * v["defence.frozen_s"] * 1e3 / v["cycle.period_ms"]
    if v["magnetometer.noise_nt"] * 1e-3 * v["magnetometer.counts_per_ut"] < 0.5:
        counts = v["control.field_min_ut"] * v["magnetometer.counts_per_ut"]
        turn_a_cycle = 2.0 * math.pi / v[ORBITAL_PERIOD] * v["cycle.period_ms"] * 1e-3
        cycles = max(cycles, 4.0 * math.sqrt(2.0 / counts) / turn_a_cycle) if cycles else cycles
    return _seconds(min(MOST_CYCLES, math.ceil(cycles - 1e-6)), v)


def guard_default_deg_s(v: Values) -> float:
    """A tenth above the tip-off rate, °/s: a spin that shows late must not look as if it had grown."""
    return _up(GUARD * math.hypot(*v["body.tip_off_deg_s"]), 2)


def gyro_frozen_default_s(v: Values) -> float:
    """20 cycles where noise keeps the counts moving; a quieter gyro may really stand still."""
    moves = v["gyro"] and v["gyro.noise_deg_s"] * v["gyro.counts_per_deg_s"] >= 0.5
    return _seconds(20, v) if moves else 0.0


def gyro_error_default_deg_s(v: Values) -> float:
    """What a healthy gyro and a healthy magnetometer may seem to contradict each other by, °/s."""
    if not v["gyro"]:
        return 0.0
    field = rate_noise_deg_s(
        v["magnetometer.noise_nt"], v["cycle.period_ms"], v["control.field_min_ut"], v["control.field_max_ut"]
    )
    crooked_deg = sum(math.hypot(*v[f"{sensor}.misalignment_error_deg"]) for sensor in ("magnetometer", "gyro"))
    contradiction = (
        5.0 * field
        + 4.0 * 360.0 / v[ORBITAL_PERIOD]
        + 5.0 * v["gyro.noise_deg_s"]
        + math.hypot(*v["gyro.bias_error_deg_s"])
        + math.hypot(*v["body.tip_off_deg_s"]) * math.radians(crooked_deg)
    )
    default = _up(max(v["control.wake_deg_s"], contradiction), 3)
    return default if default <= most_gyro_error_deg_s(v["cycle.period_ms"]) else 0.0


def most_gyro_error_deg_s(period_ms: float) -> float:
    """A larger contradiction could not be told from the turn in a period, °/s."""
    return math.degrees(COMPARED_RAD) / (period_ms * 1e-3)


def _seconds(cycles: int, v: Values) -> float:
    return round(cycles * v["cycle.period_ms"] * 1e-3, 6)


def _up(value: float, digits: int) -> float:
    """Rounded up to so many decimal digits, so that no last bit of a sine decides an integer."""
    return math.ceil(round(value * 10**digits, 6)) / 10**digits
