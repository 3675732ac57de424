"""An invented mission built by hand, so that the plant is tested without the loader."""

import math
from dataclasses import replace
from datetime import UTC, datetime

from pyharness.mission.model import (
    Body,
    Coil,
    Control,
    Cycle,
    Gyro,
    Magnetometer,
    Mission,
    Orbit,
    Supply,
)

_CORED = Coil("cored", 0.24, None, False, 6.0, 0.004, 1, 60.0)

MISSION = Mission(
    name="Tern",
    body=Body(
        inertia_kg_m2=((0.0108, 0.0007, -0.0005), (0.0007, 0.0312, 0.0004), (-0.0005, 0.0004, 0.0330)),
        tip_off_deg_s=(12.0, -11.0, 13.0),
        residual_dipole_a_m2=(0.004, -0.003, 0.005),
        drag_force_n=3.0e-6,
        pressure_centre_m=(0.012, 0.006, -0.004),
    ),
    orbit=Orbit(datetime(2027, 3, 14, 9, 30, tzinfo=UTC), 550.0, 97.6, 40.0, 0.0, None),
    supply=Supply(6.6, 7.4, 8.4),
    coil=(_CORED, replace(_CORED, polarity=-1), Coil("air", 0.2, None, False, 0.9, 0.0, 1, 60.0)),
    magnetometer=Magnetometer(
        counts_per_ut=80.0, range_ut=200.0, noise_nt=18.0,
        bias_ut=(1.4, -0.9, 2.1), bias_error_ut=(0.06, -0.04, 0.05),
        misalignment_deg=(0.8, -0.5, 1.1), misalignment_error_deg=(0.2, 0.1, -0.2),
        stray_ut_per_a_m2=((160.0, 25.0, -30.0), (20.0, -90.0, 15.0), (-35.0, 10.0, 70.0)),
    ),
    gyro=Gyro(
        counts_per_deg_s=240.0, range_deg_s=120.0, noise_deg_s=0.03,
        bias_deg_s=(0.35, -0.20, 0.15), bias_error_deg_s=(0.02, 0.03, -0.02),
        misalignment_deg=(0.3, 0.2, -0.4), misalignment_error_deg=(0.1, -0.1, 0.1),
    ),
    cycle=Cycle(500.0, 60.0, 20.0, 10.0, 400.0, 100, 0.8, 2.0),
    control=Control(
        law="derivative", k_am2_s_per_t=None, K_n_m_s=2.0e-4, gain=None, gain_scaling="constant",
        saturation="keep-direction", low_pass_s=0.0, settle_by="gyro", settled_deg_s=0.4, wake_deg_s=1.2,
        dwell_s=1435.0, wake_dwell_s=30.0, hold_off_s=30, field_min_ut=10.0, field_max_ut=80.0,
        bench_limit_ms=100.0, bench_key=1,
    ),
    source="by hand",
    digest="000000000000",
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
