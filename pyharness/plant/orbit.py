"""Orbits by SGP4, from two-line elements or as a circular orbit.

Positions and velocities are in TEME, the frame of SGP4 (true equator, mean equinox of date). Over the hours
of a detumble it is taken as inertial: precession and nutation turn it by about 0.01″ an hour.
"""

from __future__ import annotations

import math
from datetime import UTC, datetime, timedelta

import numpy as np
from sgp4.api import SGP4_ERRORS, WGS72, Satrec, jday
from sgp4.propagation import gstime

from pyharness.mission.model import Orbit
from pyharness.mission.orbit import EQUATORIAL_RADIUS_KM, MU_KM3_S2

EARTH_MU = MU_KM3_S2 * 1e9
"""Gravitational parameter of the Earth, m³/s²."""
EARTH_RADIUS_M = EQUATORIAL_RADIUS_KM * 1e3
"""Equatorial radius of the Earth, m."""

_DAYS_1949 = 2433281.5
"""Julian date of 1949-12-31 00:00 UT, from which SGP4 counts epochs."""
_DAY_S = 86400.0

_J2000, _J2000_JULIAN = datetime(2000, 1, 1, 12), 2451545.0


def circular_rate(altitude_km: float) -> float:
    """Rate of a circular orbit, n = √(μ/a³), rad/s, with a the equatorial radius plus the altitude."""
    a = EARTH_RADIUS_M + altitude_km * 1e3
    return math.sqrt(EARTH_MU / (a * a * a))


def orbital_rate(orbit: Orbit) -> float:
    """Mean motion of an orbit, rad/s."""
    if orbit.two_line_elements is None:
        return circular_rate(orbit.altitude_km)
    return _satellite(orbit).no_kozai / 60.0


def semi_major_axis_m(orbit: Orbit) -> float:
    """Semi-major axis of an orbit by Kepler's third law, m."""
    rate = orbital_rate(orbit)
    return (EARTH_MU / (rate * rate)) ** (1.0 / 3.0)


def inclination_rad(orbit: Orbit) -> float:
    """Inclination of an orbit, rad."""
    return _satellite(orbit).inclo


def orbital_period(orbit: Orbit) -> float:
    """Period of an orbit, s."""
    return 2.0 * math.pi / orbital_rate(orbit)


def _satellite(orbit: Orbit) -> Satrec:
    """SGP4 with WGS-72 constants, the ones two-line elements are made for.

    A circular orbit's altitude means a − 6378.137 km for the a of its mean motion n = √(μ/a³), μ =
    398600.4418 km³/s²; it has no drag term, so B* = 0.
    """
    if orbit.two_line_elements is not None:
        return Satrec.twoline2rv(*orbit.two_line_elements, WGS72)
    epoch = orbit.epoch_utc if orbit.epoch_utc.tzinfo is None else orbit.epoch_utc.astimezone(UTC)
    day, fraction = jday(epoch.year, epoch.month, epoch.day, epoch.hour, epoch.minute,
                         epoch.second + epoch.microsecond * 1e-6)
    satellite = Satrec()
    satellite.sgp4init(
        WGS72,
        "i",
        0,  # catalogue number
        day - _DAYS_1949 + fraction,
        0.0,  # B*
        0.0,  # first and second derivative of the mean motion, which SGP4 does not use
        0.0,
        0.0,  # eccentricity
        0.0,  # argument of perigee: the mean anomaly below is the argument of latitude
        math.radians(orbit.inclination_deg),
        math.radians(orbit.argument_of_latitude_deg),
        circular_rate(orbit.altitude_km) * 60.0,
        math.radians(orbit.node_deg),
    )
    return satellite


class Trajectory:
    """Positions along one orbit, at times in s after its epoch."""

    def __init__(self, orbit: Orbit):
        self._satellite = _satellite(orbit)

    def julian_date(self, seconds: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Julian date, UTC, as day and fraction of it."""
        fraction = self._satellite.jdsatepochF + np.asarray(seconds, dtype=float) / _DAY_S
        return np.full_like(fraction, self._satellite.jdsatepoch), fraction

    def date(self, seconds: float) -> datetime:
        """Date and time, UTC."""
        day, fraction = self.julian_date(seconds)
        return _J2000 + timedelta(days=float(day - _J2000_JULIAN + fraction))

    def state(self, seconds: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Position in m and velocity in m/s, TEME, each (3, K). Raises ValueError where SGP4 fails."""
        status, position, velocity = self._satellite.sgp4_array(*self.julian_date(seconds))
        if status.any():
            worst = int(status.max())
            raise ValueError(f"orbit: SGP4 fails within the flight: {SGP4_ERRORS[worst]}")
        return position.T * 1e3, velocity.T * 1e3

    def sidereal_angle(self, seconds: np.ndarray) -> np.ndarray:
        """Greenwich mean sidereal time, rad in [0, 2π), IAU 1982, taking UT1 as UTC (they differ by < 0.9
        s)."""
        day, fraction = self.julian_date(seconds)
        return np.array([gstime(d + f) for d, f in zip(day, fraction, strict=True)])
