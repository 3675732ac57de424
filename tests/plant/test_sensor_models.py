"""Magnetometer and gyro."""

import math
from dataclasses import replace

import numpy as np
import pytest
from plant.tern_mission import IDEAL, MISSION, ideal_with, rad
from scipy.spatial.transform import Rotation

from pyharness.plant.noise import SIGMA
from pyharness.plant.sensors import GyroModel, MagnetometerModel, rotation_matrix

STILL = np.zeros((3, 1))


def ut(*field: float) -> np.ndarray:
    return np.array(field)[:, None] * 1e-6


def mag_counts(mission, field, rate=STILL, dipole=STILL, noise=STILL):
    return MagnetometerModel([mission]).counts(field, rate, dipole, noise)[:, 0]


def gyro_counts(mission, rate_deg_s, noise=STILL):
    return GyroModel([mission]).counts(np.array(rad(*rate_deg_s))[:, None], noise)[:, 0]


def test_counts_have_scale_and_sign():
    assert mag_counts(IDEAL, ut(20.0, -30.0, 10.0)).tolist() == [1600, -2400, 800]
    assert gyro_counts(IDEAL, (10.0, -2.5, 0.1)).tolist() == [2400, -600, 24]
    assert mag_counts(IDEAL, ut(1.0, 2.0, 3.0)).dtype == np.int16


def test_rounding_is_half_to_even():
    half = 0.5 / 80.0
    assert mag_counts(IDEAL, ut(half, 3 * half, -half)).tolist() == [0, 2, 0]
    assert mag_counts(IDEAL, ut(1.01 * half, 2.9 * half, -1.01 * half)).tolist() == [1, 1, -1]


def test_readings_beyond_the_range_are_clipped():
    assert mag_counts(IDEAL, ut(1e3, -1e3, 199.99)).tolist() == [16000, -16000, 15999]
    assert gyro_counts(IDEAL, (121.0, -500.0, 119.0)).tolist() == [28800, -28800, 28560]


def test_no_reading_is_minus_32768():
    wide = ideal_with(range_ut=1e4)
    assert mag_counts(wide, ut(1e4, -1e4, 0.0)).tolist() == [32767, -32767, 0]


def test_bias_known_and_missed_add_up():
    biased = ideal_with(bias_ut=(1.0, -2.0, 0.5), bias_error_ut=(0.25, 0.5, 0.0))
    assert mag_counts(biased, ut(0.0, 0.0, 0.0)).tolist() == [100, -120, 40]
    part = replace(IDEAL.gyro, bias_deg_s=(1.0, 0.0, 0.0), bias_error_deg_s=(0.5, -0.5, 0.0))
    gyro = replace(IDEAL, gyro=part)
    assert gyro_counts(gyro, (0.0, 0.0, 1.0)).tolist() == [360, -120, 240]


def test_rotation_matrix_against_scipy():
    for vector in ((0.8, -0.5, 1.1), (0.0, 0.0, 0.0), (90.0, 0.0, 0.0), (-120.0, 40.0, 77.0)):
        expected = Rotation.from_rotvec(rad(*vector)).as_matrix()
        assert rotation_matrix(vector) == pytest.approx(expected, abs=2e-12)


def test_a_sensor_turned_about_z_reads_the_field_turned_back():
    """Sensor axes are body axes turned by +90° about z: the sensor's x is the body's y, its y the body's
    −x."""
    turned = ideal_with(misalignment_deg=(0.0, 0.0, 90.0))
    assert mag_counts(turned, ut(20.0, -30.0, 10.0)).tolist() == [-2400, -1600, 800]


def test_the_error_turns_the_known_axes_on():
    known, error = (10.0, -20.0, 30.0), (5.0, 6.0, -7.0)
    turned = ideal_with(misalignment_deg=known, misalignment_error_deg=error, counts_per_ut=150.0)
    sensor = Rotation.from_rotvec(rad(*known)) * Rotation.from_rotvec(rad(*error))
    field = np.array((20.0, -30.0, 10.0))
    assert mag_counts(turned, ut(*field)) == pytest.approx(sensor.inv().apply(field) * 150.0, abs=0.51)


def test_stray_field_is_a_column_for_each_coil():
    stray = ideal_with(stray_ut_per_a_m2=((160.0, 25.0, -30.0), (20.0, -90.0, 15.0), (-35.0, 10.0, 70.0)))
    dipole = np.array((0.1, 0.0, 0.0))[:, None]
    assert mag_counts(stray, ut(0.0, 0.0, 0.0), dipole=dipole).tolist() == [1280, 160, -280]


def test_stray_field_of_a_dipole():
    """μ0/4π (3 r̂ (m·r̂) − m)/r³: 0.2 A m² at 0.1 m gives 40 µT on the axis and 20 µT broadside, against the
    dipole."""
    r3 = 0.1**3
    on_x = np.diag((2.0, -1.0, -1.0)) * 0.1 / r3  # µT per A m², a magnetometer 0.1 m along +x
    stray = ideal_with(stray_ut_per_a_m2=tuple(map(tuple, on_x.tolist())))
    along, across = np.array((0.2, 0.0, 0.0))[:, None], np.array((0.0, 0.2, 0.0))[:, None]
    assert mag_counts(stray, ut(0.0, 0.0, 0.0), dipole=along).tolist() == [40 * 80, 0, 0]
    assert mag_counts(stray, ut(0.0, 0.0, 0.0), dipole=across).tolist() == [0, -20 * 80, 0]


def test_averaging_over_the_sample_shortens_what_turns():
    """By sin(ωs/2)/(ωs/2) across the rate, to second order; not at all along it."""
    scale = 3e4
    long_sample = replace(
        ideal_with(counts_per_ut=scale / 40.0), cycle=replace(IDEAL.cycle, sample_ms=200.0, blanking_ms=20.0))
    rate = np.array((0.0, 0.0, math.radians(60.0)))[:, None]
    x, y, z = mag_counts(long_sample, ut(40.0, 0.0, 20.0), rate=rate)
    half = math.radians(60.0) * 0.1
    assert x == pytest.approx(scale * math.sin(half) / half, abs=0.6)
    assert x < scale - 50
    assert (y, z) == (0, scale / 2)


def test_noise_has_the_standard_deviation_of_the_part():
    noise = np.full((3, 1), SIGMA)
    assert mag_counts(ideal_with(noise_nt=500.0), ut(0.0, 0.0, 0.0), noise=noise).tolist() == [40, 40, 40]
    gyro = replace(IDEAL, gyro=replace(IDEAL.gyro, noise_deg_s=0.5))
    assert gyro_counts(gyro, (0.0, 0.0, 0.0), noise=-noise).tolist() == [-120, -120, -120]


def test_a_mission_without_gyro_reads_zero_beside_one_with():
    missions = [replace(MISSION, gyro=None), IDEAL]
    counts = GyroModel(missions).counts(np.full((3, 2), 0.1), np.zeros((3, 2)))
    assert not counts[:, 0].any() and counts[:, 1].all()
