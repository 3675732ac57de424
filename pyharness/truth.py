"""The truth: what the controller stands for, in float64 and SI, and how far the integers may be from it.

The laws are `derivative_law`, `rate_law` and the two saturations. `Truth` follows a controller step by step: it takes the same
counts and stamps, and the controller's discrete decisions (which sample is trusted, whether there is a derivative, which law
acts, the quantised gain), and works the dipole out anew from the mission's own numbers. Beside it goes the largest difference
that quantisation and rounding can make, derived in fsw_c/README.md under "Distance from the truth".

Arrays have x, y, z first and the spacecraft last: (3, N).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pyharness.exact import constants as mrd
from pyharness.plant.batch import cross
from pyharness.plant.sensors import rotation_matrix
from pyharness.scaling import FULL_SCALE, Q15, Scaling

LIMIT = FULL_SCALE / Q15
"""Saturated command as a share of the dipole limit: the greatest Q15 number."""


def derivative_law(k: np.ndarray, field_rate: np.ndarray) -> np.ndarray:
    """m = −k dB/dt. k in A m² s/T, dB/dt in T/s, body axes; m in A m². Linear: counts in, with a gain in counts, give counts."""
    return -k * field_rate


def rate_law(k: np.ndarray, rate: np.ndarray, field: np.ndarray) -> np.ndarray:
    """m = k (ω × B). k in A m² s/T, ω in rad/s, B in T, body axes; m in A m². Bilinear: as above."""
    return k * cross(rate, field)


def saturate_per_axis(share: np.ndarray) -> np.ndarray:
    """Clip each axis of a dipole, given as a share of its limit."""
    return np.clip(share, -LIMIT, LIMIT)


def saturate_keep_direction(share: np.ndarray) -> np.ndarray:
    """Scale a dipole, given as shares of the limits, so that its largest axis is within its limit."""
    largest = np.abs(share).max(axis=0)
    return share * (LIMIT / np.maximum(largest, LIMIT))


@dataclass(frozen=True)
class TruthStep:
    """The truth about one step, each (3, N), and how far the integers may be from it."""

    active: np.ndarray  # (N,) bool: a law acted
    command: np.ndarray  # mean dipole over the cycle, after saturation, command counts
    command_bound: np.ndarray  # largest |integer − command|, command counts
    ticks: np.ndarray  # signed ticks of coil current, unrounded, no pulse dropped
    ticks_bound: np.ndarray  # largest |integer − ticks| but for dropped short pulses, ticks


class Truth:
    """Follows N controllers, one mission each."""

    def __init__(self, scalings: Sequence[Scaling]):
        self._scalings = list(scalings)
        self._mag = _Sensors(scalings, "mag")
        self._gyro = _Sensors(scalings, "gyro")
        last = lambda values: np.array(list(values), dtype=float).T  # noqa: E731 - spacecraft last
        config = [s.config["path"] for s in scalings]
        self._period_us = last(s.timeline.period_us for s in scalings)
        self._period_bits = np.array([c["period_us"].bit_length() - 15 for c in config])
        self._smoothing = last(c["filter_gain"] / Q15 for c in config)
        self._window = last(c["window_ticks"] for c in config)
        self._polarity = last(c["polarity"] for c in config)
        self._normalised = np.array([c["gain_scaling"] == mrd.MRD_GAIN_NORMALISED for c in config])
        self._norm_range = tuple(last(c[key] for c in config) for key in ("norm_min_sq", "norm_max_sq"))
        self._keep = np.array([c["saturation"] == mrd.MRD_SATURATE_KEEP_DIRECTION for c in config])
        self._gain = {
            law: last([m / 2.0**h for m, h in zip(c[key]["mantissa"], c[key]["shift"], strict=True)] for c in config)
            for law, key in ((mrd.MRD_LAW_DERIVATIVE, "derivative_gain"), (mrd.MRD_LAW_RATE, "rate_gain"))
        }
        self.reset()

    def reset(self) -> None:
        """Forget the previous sample and the filter."""
        shape = (3, len(self._scalings))
        self._field, self._field_error = np.zeros(shape), np.zeros(shape)
        self._filter, self._filter_error = np.zeros(shape), np.zeros(shape)
        self._filtering = np.zeros(shape[1], dtype=bool)

    def snapshot(self) -> tuple[np.ndarray, ...]:
        """A copy of all that is carried from step to step."""
        carried = (self._field, self._field_error, self._filter, self._filter_error, self._filtering)
        return tuple(a.copy() for a in carried)

    def restore(self, snapshot: tuple[np.ndarray, ...]) -> None:
        """Return to a snapshot."""
        copies = (a.copy() for a in snapshot)
        self._field, self._field_error, self._filter, self._filter_error, self._filtering = copies

    def step(self, inputs: np.ndarray, outputs: np.ndarray) -> TruthStep:
        """The truth about one step of all N controllers, from its inputs and the decisions in its outputs (records)."""
        trace = outputs["trace"]
        trusted = trace["gate"]["trusted"] != 0
        derived = trace["derivative"]["valid"] != 0
        active = trace["law"]["active"]

        # Fields in field counts, unrounded: what the mission's calibration makes of the raw counts.
        field, field_error = self._mag.calibrate(inputs["path"]["mag_raw"].T.astype(float))
        change, change_error = self._derivative(field, field_error, trace["derivative"]["interval_us"])
        filtered, filtered_error = self._low_pass(change, change_error, derived)
        rate, by_rate_error = self._rate(inputs, field, field_error)

        rate_acts = active == mrd.MRD_LAW_RATE
        gain = np.where(rate_acts, self._gain[mrd.MRD_LAW_RATE], self._gain[mrd.MRD_LAW_DERIVATIVE])
        gain, gain_error = self._normalise(gain, field, field_error)
        demand = np.where(rate_acts, rate_law(gain, rate, field), derivative_law(gain, filtered))
        error = gain * np.where(rate_acts, by_rate_error, filtered_error) * (1 + gain_error) + np.abs(demand) * gain_error + 0.5
        command, command_error = self._saturate(demand, error)

        self._field = np.where(trusted, field, self._field)
        self._field_error = np.where(trusted, field_error, self._field_error)
        acts = active != mrd.MRD_LAW_NONE
        command, command_error = np.where(acts, command, 0.0), np.where(acts, command_error, 0.0)
        share = self._window / Q15
        return TruthStep(
            active=acts,
            command=command,
            command_bound=command_error,
            ticks=command * share * self._polarity,
            ticks_bound=np.where(acts, command_error * share + 0.5, 0.0),
        )

    def _derivative(self, field: np.ndarray, error: np.ndarray, interval_us: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Field counts a period, clamped as the integers are."""
        interval = np.maximum(interval_us.astype(float), 1.0)
        ratio = self._period_us / interval
        nominal = interval == self._period_us
        # Dropping low bits of both moves their quotient by less than (1 + ratio) / I, rounding it by 2^-15.
        ratio_error = np.where(nominal, 0.0, (1.0 + ratio) * 2.0**self._period_bits / interval + 2.0**-15)
        change = field - self._field
        change_error = error + self._field_error
        value = change * ratio
        bound = change_error * (ratio + ratio_error) + np.abs(change) * ratio_error + np.where(nominal, 0.0, 0.5)
        return np.clip(value, -FULL_SCALE, FULL_SCALE), bound

    def _low_pass(self, change: np.ndarray, error: np.ndarray, derived: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        a = np.where(self._filtering, self._smoothing, 1.0)
        rounding = np.where(a == 1.0, 0.0, 0.5 / 256)
        filtered = self._filter + a * (change - self._filter)
        bound = (1 - a) * self._filter_error + a * error + rounding
        self._filter = np.where(derived, filtered, self._filter)
        self._filter_error = np.where(derived, bound, self._filter_error)
        self._filtering = derived
        # The law takes whole counts; without a low-pass the filter holds whole counts already.
        return filtered, bound + np.where(self._smoothing == 1.0, 0.0, 0.5)

    def _rate(self, inputs: np.ndarray, field: np.ndarray, error: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """ω in units of 2^16 rate counts, as the rate gain takes it, and the largest error of ω × B."""
        rate, rate_error = self._gyro.calibrate(inputs["path"]["gyro_raw"].T.astype(float))
        bound = np.zeros_like(field)
        for i, j, k in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
            for a, b in ((j, k), (k, j)):
                bound[i] += np.abs(rate[a]) * error[b] + rate_error[a] * np.abs(field[b]) + rate_error[a] * error[b]
        return rate / 65536.0, bound / 65536.0

    def _normalise(self, gain: np.ndarray, field: np.ndarray, error: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """The gain over ‖B‖² where it is normalised, and its largest relative error."""
        norm_sq = np.clip(np.add.reduce(field * field, axis=0), *self._norm_range)
        slack = np.add.reduce(2 * np.abs(field) * error + error * error, axis=0) / norm_sq
        relative = 2.0**-14 + slack / np.maximum(1 - slack, 0.5) * (1 + 2.0**-14)
        return np.where(self._normalised, gain / norm_sq, gain), np.where(self._normalised, relative, 0.0)

    def _saturate(self, demand: np.ndarray, error: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        share = demand / Q15
        command = np.where(self._keep, saturate_keep_direction(share), saturate_per_axis(share)) * Q15
        # Scaling to the limit: its own error, that of the largest axis in proportion, and two counts of rounding. The
        # integers divide by their own largest axis, which may be smaller than the truth's by the worst error.
        largest, worst = np.abs(demand).max(axis=0), error.max(axis=0)
        scaled = self._keep & (largest + worst > FULL_SCALE)
        shrink = FULL_SCALE / np.maximum(largest - worst, FULL_SCALE)
        part = np.abs(demand) / np.maximum(largest, FULL_SCALE)
        bound = np.where(scaled, shrink * (error + part * worst) + 2.0, error)
        return command, np.minimum(bound, 2.0 * FULL_SCALE)


class _Sensors:
    """The mission's calibration of one kind of sensor, unrounded, and what the integers add to it."""

    def __init__(self, scalings: Sequence[Scaling], kind: str):
        real, offset, quantised, quantised_offset = [], [], [], []
        for s in scalings:
            config = s.config["path"][kind]
            step = 2.0 ** config["shift"]
            matrix, bias = _calibration(s, kind)
            real.append(matrix)
            offset.append(bias)
            quantised.append(np.array(config["matrix"]).reshape(3, 3) / step)
            quantised_offset.append(np.array(config["offset"], dtype=float))
        self._matrix, self._offset = np.stack(real, axis=-1), np.stack(offset, axis=-1)  # (3, 3, N), (3, N)
        self._matrix_error = np.stack(quantised, axis=-1) - self._matrix
        self._offset_error = np.stack(quantised_offset, axis=-1) - self._offset

    def calibrate(self, raw: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Counts on board, unrounded and clamped, from raw counts (3, N); and the largest error of the integer ones."""
        value = np.add.reduce(self._matrix * raw, axis=1) - self._offset
        quantisation = np.add.reduce(self._matrix_error * raw, axis=1) - self._offset_error
        return np.clip(value, -FULL_SCALE, FULL_SCALE), np.abs(quantisation) + 0.5


def _calibration(s: Scaling, kind: str) -> tuple[np.ndarray, np.ndarray]:
    """Matrix and offset from raw counts to counts on board, in real numbers."""
    if kind == "mag":
        part = s.mission.magnetometer
        rotation = rotation_matrix(part.misalignment_deg)
        return rotation * (s.raw_field_t / s.field_t), _rotated(rotation, part.bias_ut) * (1e-6 / s.field_t)
    if s.mission.gyro is None:
        return np.zeros((3, 3)), np.zeros(3)
    part = s.mission.gyro
    rotation = rotation_matrix(part.misalignment_deg)
    per_degree = np.radians(1.0) / s.rate_rad_s
    return rotation * (s.raw_rate_rad_s / s.rate_rad_s), _rotated(rotation, part.bias_deg_s) * per_degree


def _rotated(rotation: np.ndarray, vector: Sequence[float]) -> np.ndarray:
    return np.add.reduce(rotation * np.array(vector), axis=1)
