"""Settles which of alternative keys hold, and fills in the defaults that depend on other keys."""

from __future__ import annotations

from pyharness.mission.defence import (
    dead_axis_default_s,
    frozen_default_s,
    guard_default_deg_s,
    gyro_error_default_deg_s,
    gyro_frozen_default_s,
    jump_default_ut,
    noise_default_ut,
)
from pyharness.mission.model import AXES, Winding
from pyharness.mission.orbit import (
    Extent,
    circular_extent,
    elements_extent,
    elements_problems,
    field_bounds_ut,
)
from pyharness.mission.reading import Reading
from pyharness.mission.schema import BY_PATH, ORBITAL_PERIOD
from pyharness.mission.wording import joined, quantity, rounded

WINDING = ("turns", "area_m2", "resistance_ohm", "resistance_temperature_c", "temperature_c")
_CIRCULAR = ("orbit.epoch_utc", "orbit.altitude_km", "orbit.inclination_deg", "orbit.node_deg")
_ARGUMENT = "orbit.argument_of_latitude_deg"
_ELEMENTS = "orbit.two_line_elements"
_GAINS = ("control.k_am2_s_per_t", "control.K_n_m_s", "control.gain")


def complete(reading: Reading) -> None:
    """Add to the reading what follows from the keys that are given, and the problems met on the way."""
    if not reading.is_broken("orbit"):
        _orbit(reading)
    for axis in AXES:
        if not reading.is_broken(f"coil.{axis}"):
            _dipole(reading, axis)
            _remanence(reading, axis)
            if reading.has("cycle.blanking_ms"):
                _default(reading, f"coil.{axis}.blanking_ms", reading.values["cycle.blanking_ms"])
    if not reading.is_broken("control"):
        _gain(reading)
        _default(reading, "control.settle_by", "gyro" if reading.values["gyro"] else "field")
    if not reading.is_broken("defence"):
        _defence(reading)
    if reading.has("current_sense.counts_at_full"):
        full = reading.values["current_sense.counts_at_full"]
        _default(reading, "current_sense.off_counts", max(1, round(0.05 * full)))


def _default(reading: Reading, path: str, value: object) -> None:
    if path not in reading.given:
        reading.values[path] = value


def _orbit(reading: Reading) -> None:
    if _ELEMENTS in reading.given:
        extra = [path for path in (*_CIRCULAR, _ARGUMENT) if path in reading.given]
        if extra:
            reading.problems.append(f"{_ELEMENTS}: excludes {joined(extra)}, give one or the other")
        if reading.has(_ELEMENTS):
            lines = reading.values[_ELEMENTS]
            problems = elements_problems(lines, _ELEMENTS)
            reading.problems += problems
            if not problems:
                _from_extent(reading, elements_extent(lines))
        return
    for path in _CIRCULAR:
        if path not in reading.given:
            reading.missing(path, f" (or give {_ELEMENTS})")
    _default(reading, _ARGUMENT, 0.0)
    if reading.has("orbit.altitude_km"):
        _from_extent(reading, circular_extent(reading.values["orbit.altitude_km"]))


def _from_extent(reading: Reading, extent: Extent) -> None:
    least, greatest = field_bounds_ut(extent)
    reading.values[ORBITAL_PERIOD] = extent.period_s
    _default(reading, "control.dwell_s", round(extent.period_s / 4.0, 1))
    _default(reading, "control.field_min_ut", least)
    _default(reading, "control.field_max_ut", greatest)
    _default(reading, "defence.window_s", round(extent.period_s / 2.0, 1))
    _default(reading, "defence.pause_s", round(extent.period_s, 1))


def _dipole(reading: Reading, axis: str) -> None:
    dipole = f"coil.{axis}.dipole_a_m2"
    winding = [f"coil.{axis}.{name}" for name in WINDING]
    given = [path for path in winding if path in reading.given]
    if dipole in reading.given:
        if given:
            reading.problems.append(f"{dipole}: excludes {joined(given)}, give one or the other")
    elif not given:
        reading.missing(dipole, f" (or give {joined(WINDING)})")
    else:
        for path in winding:
            if path not in given:
                reading.missing(path, f" (the dipole follows from {joined(WINDING)} together)")
        _derive_dipole(reading, axis, dipole, winding)


def _derive_dipole(reading: Reading, axis: str, dipole: str, winding: list[str]) -> None:
    supply, pair = "supply.nominal_v", f"coil.{axis}.mirrored_pair"
    if not reading.has(supply, pair, *winding):
        return
    one = Winding(*(reading.values[path] for path in winding)).dipole_a_m2(reading.values[supply])
    derived = 2.0 * one if reading.values[pair] else one
    reading.values[dipole] = derived
    key = BY_PATH[dipole]
    if derived not in key.limits:
        source = joined(_named(reading, path) for path in (*winding, pair, supply))
        reading.problems.append(
            f"{dipole}: {rounded(derived, key.unit)} derived from {source}, must be in {key.limits}"
        )


def _named(reading: Reading, path: str) -> str:
    return f"{path} {quantity(reading.values[path], BY_PATH[path].unit)}"


def _remanence(reading: Reading, axis: str) -> None:
    path = f"coil.{axis}.remanence_fraction"
    core = reading.values.get(f"coil.{axis}.core")
    if core == "air":
        _default(reading, path, 0.0)
        if reading.values.get(path):
            reading.problems.append(
                f'{path}: {reading.values[path]}, must be 0 or left out with coil.{axis}.core "air": '
                "without a core nothing stays magnetised"
            )
    elif core == "cored" and path not in reading.given:
        reading.missing(path, f' with coil.{axis}.core "cored"')


def _gain(reading: Reading) -> None:
    given = [path for path in _GAINS if path in reading.given]
    if not given:
        choices = " or ".join(f"{path} ({BY_PATH[path].expected()})" for path in _GAINS)
        reading.problems.append(f"control: the gain is missing, give exactly one of {choices}")
    elif len(given) > 1:
        reading.problems.append(f"control: {joined(given)} exclude each other, give exactly one")


_MAGNETOMETER = ("counts_per_ut", "noise_nt", "bias_error_ut", "misalignment_error_deg", "stray_ut_per_a_m2")
_GYRO = ("counts_per_deg_s", "noise_deg_s", "bias_error_deg_s", "misalignment_error_deg")
_COIL = ("dipole_a_m2", "remanence_fraction", "time_constant_ms", "blanking_ms")
_SOURCES = (
    "body.tip_off_deg_s", ORBITAL_PERIOD, "supply.nominal_v", "supply.max_v", "cycle.period_ms",
    "control.field_min_ut", "control.field_max_ut", "control.wake_deg_s",
    *(f"magnetometer.{name}" for name in _MAGNETOMETER),
    *(f"coil.{axis}.{name}" for axis in AXES for name in _COIL),
)  # fmt: skip
"""What the defaults of the defences follow from, beside the gyro."""


def _defence(reading: Reading) -> None:
    values = reading.values
    gyro = [f"gyro.{name}" for name in _GYRO] if values["gyro"] else []
    if not reading.has(*_SOURCES, *gyro):
        return  # what is missing is told already
    _default(reading, "defence.jump_ut", jump_default_ut(values))
    _default(reading, "defence.noise_ut", noise_default_ut(values))
    _default(reading, "defence.frozen_s", frozen_default_s(values))
    if reading.has("defence.frozen_s"):
        _default(reading, "defence.dead_axis_s", dead_axis_default_s(values))
    _default(reading, "defence.guard_deg_s", guard_default_deg_s(values))
    _default(reading, "defence.gyro_frozen_s", gyro_frozen_default_s(values))
    _default(reading, "defence.gyro_error_deg_s", gyro_error_default_deg_s(values))
