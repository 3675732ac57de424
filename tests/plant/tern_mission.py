"""The mission of the tests, and ideal ones made from it, for the plant."""

import math
from dataclasses import replace
from pathlib import Path

from pyharness.mission import Gyro, Magnetometer, Mission, load_mission

_WINDING = ("turns", "area_m2", "resistance_ohm", "resistance_temperature_c", "temperature_c", "mirrored_pair")

MISSION = load_mission(
    Path(__file__).parents[1] / "mission" / "base.toml",
    {"coil": {"z": {**dict.fromkeys(_WINDING), "dipole_a_m2": 0.2}}},
)

_ZERO = (0.0, 0.0, 0.0)

FREE_BODY = replace(MISSION.body, residual_dipole_a_m2=_ZERO, drag_force_n=0.0)
"""Nothing turns it but its coils and gravity."""

IDEAL = replace(
    MISSION,
    body=FREE_BODY,
    coil=tuple(replace(c, polarity=1, remanence_fraction=0.0, dipole_a_m2=0.2) for c in MISSION.coil),
    magnetometer=Magnetometer(80.0, 200.0, 0.0, _ZERO, _ZERO, _ZERO, _ZERO, (_ZERO, _ZERO, _ZERO)),
    gyro=Gyro(240.0, 120.0, 0.0, _ZERO, _ZERO, _ZERO, _ZERO),
)
"""Sensors without error, coils without remanence, no disturbance torque but gravity's."""


def ideal_with(**magnetometer) -> Mission:
    """IDEAL but for some fields of its magnetometer."""
    return replace(IDEAL, magnetometer=replace(IDEAL.magnetometer, **magnetometer))


def rad(*degrees: float) -> tuple[float, ...]:
    """Degrees to radians."""
    return tuple(math.radians(d) for d in degrees)
