"""What the orbit brings, in TEME axes: geomagnetic field, direction of flight, gradient of gravity.

All three are tabulated once along the orbit at knots about 30 s apart, rounded to a grid so that the table
has the same bits on every machine, and interpolated by cubic Hermite polynomials, whose slopes are
sixth-order differences of the rounded knots. Within a cycle they are quadratics through its start, middle and
end. A cycle here runs from one mid-sample to the next, and knots fall on its ends.
"""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime
from functools import lru_cache
from typing import Protocol

import numpy as np
import ppigrf

from pyharness.mission.model import Mission, Orbit
from pyharness.plant.batch import norm, round_to
from pyharness.plant.cycle import Timeline
from pyharness.plant.orbit import EARTH_MU, Trajectory

FIELD, FLIGHT, GRADIENT = range(3)
"""Vectors of an environment: field, T; unit velocity; s = r̂ √(3μ/r³), 1/s, whose s × J s is gravity's
torque."""

KNOT_US = 30_000_000
"""Knots are this far apart, or the next whole number of cycles below."""

_GRID_BITS = (37, 24, 33)
"""Grid of the knots: 7.3e-12 T, 6e-8, 1.2e-10 1/s."""

_SLOPE = ((3, 45.0 / 60.0), (2, -9.0 / 60.0), (1, 1.0 / 60.0))
"""Sixth-order central difference: weight by the distance from the edge of seven knots, per spacing."""
_GUARD = 3

_IGRF_FROM, _IGRF_TO = datetime(1900, 1, 1), datetime(2030, 1, 1)


class Environment(Protocol):
    """Anything that gives the three vectors over a cycle."""

    def quadratic(self, cycle: int) -> np.ndarray:
        """Coefficients of x⁰, x¹, x² over the cycle, x from 0 to 1: (3, 3 components, 3 vectors, N), TEME."""


def geomagnetic_field(trajectory: Trajectory, seconds: np.ndarray, date: datetime) -> np.ndarray:
    """IGRF-14 along an orbit with the coefficients of one date (UTC): (3, K), T, TEME.

    Polar motion is neglected. Raises ValueError for a date that IGRF-14 does not cover.
    """
    if not _IGRF_FROM <= date <= _IGRF_TO:
        raise ValueError(f"orbit: epoch {date:%Y-%m-%d} UTC, must be in [1900, 2030], which IGRF-14 covers")
    position, _ = trajectory.state(seconds)
    x, y, z = position
    rho, r = norm(position[:2]), norm(position)
    longitude = np.arctan2(y, x) - trajectory.sidereal_angle(seconds)
    up, south, east = (
        component[0] * 1e-9
        for component in ppigrf.igrf_gc(r * 1e-3, np.degrees(np.arctan2(rho, z)), np.degrees(longitude), date)
    )
    # From spherical components straight to TEME: the axes follow from the position, whatever its longitude.
    horizontal = (up * rho + south * z) / r
    return np.stack((
        (horizontal * x - east * y) / rho,
        (horizontal * y + east * x) / rho,
        (up * z - south * rho) / r,
    ))


def _knots(trajectory: Trajectory, seconds: np.ndarray, date: datetime) -> np.ndarray:
    """The three vectors at times, s after the epoch, on their grids: (K, 3 components, 3 vectors)."""
    position, velocity = trajectory.state(seconds)
    r = norm(position)
    vectors = (
        geomagnetic_field(trajectory, seconds, date),
        velocity / norm(velocity),
        position / r * np.sqrt(3.0 * EARTH_MU / (r * r * r)),
    )
    return np.stack([round_to(v.T, bits) for v, bits in zip(vectors, _GRID_BITS, strict=True)], axis=-1)


@lru_cache(maxsize=256)
def _hermite(orbit: Orbit, start_us: int, spacing_us: int, intervals: int) -> np.ndarray:
    """Cubics in u from 0 to 1 over each interval: (intervals, 4 powers, 3 components, 3 vectors), shared."""
    trajectory = Trajectory(orbit)
    seconds = (start_us + np.arange(-_GUARD, intervals + 1 + _GUARD) * spacing_us) * 1e-6
    # One date, the start's, so that no cycle depends on the length; the secular variation is 0.01 nT an hour.
    f = _knots(trajectory, seconds, trajectory.date(start_us * 1e-6))
    inner = intervals + 1
    slope = sum(w * (f[2 * _GUARD - i + 1:][:inner] - f[i - 1:][:inner]) for i, w in _SLOPE)
    f = f[_GUARD:-_GUARD]
    f0, f1, s0, s1 = f[:-1], f[1:], slope[:-1], slope[1:]
    cubics = np.stack((f0, s0, 3.0 * (f1 - f0) - 2.0 * s0 - s1, 2.0 * (f0 - f1) + s0 + s1), axis=1)
    cubics.flags.writeable = False
    return cubics


class OrbitEnvironment:
    """The environment of N spacecraft on their own orbits; equal orbits and starts share one table.

    `start_s` (N,): start of the first cycle, s after each orbit's epoch. Every flight lasts at most
    `duration_s`.
    """

    def __init__(self, missions: Sequence[Mission], start_s: np.ndarray, duration_s: float):
        timelines = [Timeline.of(m) for m in missions]
        period_us = timelines[0].period_us
        self._cycles_per_knot = max(1, KNOT_US // period_us)
        spacing_us = self._cycles_per_knot * period_us
        intervals = int(duration_s * 1e6) // spacing_us + 1
        keys = [
            (m.orbit, round(float(s) * 1e6) + t.mid_sample_us, spacing_us, intervals)
            for m, t, s in zip(missions, timelines, start_s, strict=True)
        ]
        distinct = {key: row for row, key in enumerate(dict.fromkeys(keys))}
        self._tables = [_hermite(*key) for key in distinct]
        self._row = np.array([distinct[key] for key in keys])
        self._intervals = intervals
        self._interval = -1
        self._cubic = np.empty(0)

    def quadratic(self, cycle: int) -> np.ndarray:
        """See `Environment`. Raises ValueError beyond the duration."""
        interval, place = divmod(cycle, self._cycles_per_knot)
        if interval != self._interval:
            self._load(interval)
        # Start, middle and end in one evaluation.
        u = (np.array((0.0, 0.5, 1.0)) + place)[:, None, None, None] / self._cycles_per_knot
        c0, c1, c2, c3 = self._cubic
        start, middle, end = c0 + u * (c1 + u * (c2 + u * c3))
        return np.stack((start, 4.0 * middle - 3.0 * start - end, 2.0 * (start + end) - 4.0 * middle))

    def _load(self, interval: int) -> None:
        if interval >= self._intervals:
            raise ValueError("duration_s: the flight is longer than the environment was tabulated for")
        cubics = np.stack([table[interval] for table in self._tables], axis=-1)
        self._cubic = cubics.take(self._row, axis=-1)
        self._interval = interval


class ConstantField:
    """A field (3, N), T, that never changes, far from any gravity or air."""

    def __init__(self, field: np.ndarray):
        field = np.asarray(field, dtype=float)
        self._quadratic = np.zeros((3, 3, 3, field.shape[-1]))
        self._quadratic[0, :, FIELD] = field

    def quadratic(self, cycle: int) -> np.ndarray:
        """See `Environment`; every cycle is the same."""
        return self._quadratic
