"""Magnetometer, gyro and current sense: from truth to counts, as the parts do it.

A misalignment is the rotation vector that turns body axes into sensor axes, so a sensor reads v_sensor = Rᵀ
v_body. The error turns the known sensor axes on: R = R(known) R(error).
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from pyharness.mission.model import Gyro, Magnetometer, Mission, Vector
from pyharness.plant.batch import cross, round_to, spacecraft_last
from pyharness.plant.cycle import Timeline
from pyharness.plant.noise import SIGMA

_MAX_COUNTS = 32767
_ROTATION_BITS = 40


def rotation_matrix(rotation_deg: Vector) -> np.ndarray:
    """Active rotation by a rotation vector in degrees (Rodrigues), (3, 3), rounded to 2^-40."""
    x, y, z = (math.radians(r) for r in rotation_deg)
    angle = math.sqrt(x * x + y * y + z * z)
    skew = np.array(((0.0, -z, y), (z, 0.0, -x), (-y, x, 0.0)))
    sine = math.sin(angle) / angle if angle else 1.0
    versine = (1.0 - math.cos(angle)) / angle**2 if angle else 0.5
    return round_to(np.eye(3) + sine * skew + versine * _product(skew, skew), _ROTATION_BITS)


def _product(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    return np.add.reduce(a.T[:, :, None] * b[:, None, :], axis=0)


class _Triad:
    """Three sensing axes: misalignment, scale, bias, noise, rounding half to even, clipping."""

    def __init__(self, parts: Sequence[Magnetometer | Gyro], scale: Sequence[float],
                 bias: Sequence[np.ndarray], noise: Sequence[float], full_scale: Sequence[float]):
        """Scale in counts per SI unit; bias, noise and full scale in counts."""
        self._to_counts = spacecraft_last(
            s * _product(rotation_matrix(p.misalignment_deg), rotation_matrix(p.misalignment_error_deg))
            for s, p in zip(scale, parts, strict=True)
        )  # (3 body, 3 sensor, N): R of the sensor's axes, which transposed takes body to sensor
        self._bias = spacecraft_last(bias)
        self._noise = spacecraft_last(noise) / SIGMA
        self._limit = np.minimum(np.floor(spacecraft_last(full_scale)), _MAX_COUNTS)

    def counts(self, body: np.ndarray, noise: np.ndarray) -> np.ndarray:
        """Counts (3, N) int16 of a body vector (3, N), with noise (3, N) of standard deviation `SIGMA`."""
        exact = np.add.reduce(self._to_counts * body[:, None], axis=0) + self._bias + self._noise * noise
        return np.clip(np.rint(exact), -self._limit, self._limit).astype(np.int16)


class MagnetometerModel:
    """Three-axis magnetometers of N spacecraft, each disturbed by what its coils leave behind."""

    def __init__(self, missions: Sequence[Mission]):
        parts = [m.magnetometer for m in missions]
        self._triad = _Triad(
            parts,
            scale=[p.counts_per_ut * 1e6 for p in parts],
            bias=[p.counts_per_ut * (np.array(p.bias_ut) + p.bias_error_ut) for p in parts],
            noise=[p.counts_per_ut * p.noise_nt * 1e-3 for p in parts],
            full_scale=[p.counts_per_ut * p.range_ut for p in parts],
        )
        # (3 coils, 3 body axes, N), T per A m²
        self._stray = spacecraft_last(np.transpose(p.stray_ut_per_a_m2) for p in parts) * 1e-6
        sample_s = spacecraft_last(Timeline.of(m).sample_us for m in missions) * 1e-6
        self._sample_s2_24 = sample_s * sample_s / 24.0

    def counts(self, field: np.ndarray, rate: np.ndarray, dipole: np.ndarray,
               noise: np.ndarray) -> np.ndarray:
        """Counts (3, N) int16 of a sample centred on now.

        `field` true, body axes, T; `rate` rad/s; `dipole` of each coil left during the sample, A m²; `noise`
        of standard deviation `SIGMA`. The mean over a sample of length s is B + s²/24 d²B/dt² + O(s⁴), and of
        a field fixed in inertial axes d²B/dt² = ω × (ω × B) in body axes: the first term of sin(ωs/2)/(ωs/2).
        """
        mean = field + self._sample_s2_24 * cross(rate, cross(rate, field))
        return self._triad.counts(mean + np.add.reduce(self._stray * dipole[:, None], axis=0), noise)


_NO_GYRO = Gyro(1.0, 0.0, 0.0, (0.0,) * 3, (0.0,) * 3, (0.0,) * 3, (0.0,) * 3)
"""Range 0: it reads zero."""


class GyroModel:
    """Three-axis gyros of N spacecraft; one without a gyro reads zero counts."""

    def __init__(self, missions: Sequence[Mission]):
        parts = [m.gyro or _NO_GYRO for m in missions]
        self._triad = _Triad(
            parts,
            scale=[p.counts_per_deg_s * (180.0 / math.pi) for p in parts],
            bias=[p.counts_per_deg_s * (np.array(p.bias_deg_s) + p.bias_error_deg_s) for p in parts],
            noise=[p.counts_per_deg_s * p.noise_deg_s for p in parts],
            full_scale=[p.counts_per_deg_s * p.range_deg_s for p in parts],
        )

    def counts(self, rate: np.ndarray, noise: np.ndarray) -> np.ndarray:
        """Counts (3, N) int16 of the body rate (3, N), rad/s, with `noise` of standard deviation `SIGMA`."""
        return self._triad.counts(rate, noise)


class CurrentSenseModel:
    """Current senses of N spacecraft; one without reads zero counts."""

    def __init__(self, missions: Sequence[Mission]):
        parts = [m.current_sense for m in missions]
        self.fitted = np.array([part is not None for part in parts])
        self._full = np.array([part.counts_at_full if part else 0.0 for part in parts])
        self._noise = np.array([part.noise_counts if part else 0.0 for part in parts]) / SIGMA

    def counts(self, current: np.ndarray, noise: np.ndarray) -> np.ndarray:
        """Counts (3, N) int16 of currents (3, N) in parts of the full one; `noise` of standard deviation `SIGMA`."""
        exact = self._full * current + self._noise * noise
        return np.clip(np.rint(exact), -_MAX_COUNTS, _MAX_COUNTS).astype(np.int16)
