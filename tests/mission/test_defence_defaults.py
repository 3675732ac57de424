"""Defaults of the defences and of the current sense, worked out from the mission's other numbers."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from pyharness.mission import load_mission

BASE = Path(__file__).with_name("base.toml")
ORBITAL_RAD_S = 2.0 * math.pi / 5738.99


def defence(**tables):
    return load_mission(BASE, tables).defence


def test_jump():
    # Turned: 16.9637 µT (see test_checks). Noise 6 √2 × 0.018; coils: 0.4 % and e^−10 of 0.24 A m² × 8.4 / 7.4 through stray columns
    # of norm √(160² + 20² + 35²) and √(25² + 90² + 10²), twice; orbit 3 n × 62.4 µT × 0.5 s; two counts of 1/80 µT.
    left = (0.004 + math.exp(-10)) * 0.24 * 8.4 / 7.4 * (math.sqrt(27225) + math.sqrt(8825))
    sensor = 6 * math.sqrt(2) * 0.018 + 2 * left + 3 * ORBITAL_RAD_S * 62.4 * 0.5 + 0.025
    assert defence().jump_ut == pytest.approx(16.9637 + sensor, abs=0.011)
    assert defence().jump_ut >= 16.9637 + sensor - 0.001, "rounded up"


def test_noise_counts_the_bias_error_too():
    without = defence(magnetometer={"bias_error_ut": [0, 0, 0]}).noise_ut
    assert defence().noise_ut - without == pytest.approx(2 * math.sqrt(0.06**2 + 0.04**2 + 0.05**2), abs=1.1e-3)
    assert defence(magnetometer={"bias_error_ut": [1, 0, 0]}).jump_ut == defence().jump_ut, "it stands still in the body"


def test_current_that_has_not_decayed_counts_as_left_behind():
    # z is an air coil, so all it leaves is current: e^−(4/2) of 0.2081958 A m² × 8.4 / 7.4 through √(30² + 15² + 70²).
    slow = {"z": {"time_constant_ms": 2.0, "blanking_ms": 4.0}}
    left = math.exp(-2.0) * 0.2081958 * 8.4 / 7.4 * math.sqrt(6025)
    more = defence(coil=slow, current_sense=None).noise_ut - defence().noise_ut
    assert more == pytest.approx(2 * left, abs=2e-3)


def test_frozen_is_ten_counts_of_the_weakest_field():
    # 0.608703 counts a cycle (see test_checks): 17 cycles; half as many counts take 33.
    assert (defence().frozen_s, defence().dead_axis_s) == (8.5, 68.0)
    assert defence(magnetometer={"counts_per_ut": 40.0}).frozen_s == 16.5
    assert defence(control={"field_min_ut": 62.0}).frozen_s == 2.0, "at least four cycles"
    coarse = defence(magnetometer={"counts_per_ut": 0.1}, control={"field_min_ut": 0.1}, cycle={"period_ms": 500})
    assert (coarse.frozen_s, coarse.dead_axis_s) == (0.0, 0.0), "more than 65535 cycles cannot be counted"


def test_a_quiet_axis_may_stand_still_at_its_extremum():
    # C = 13.9 × 80 = 1112 counts stand within one count over ±√(2/C) = ±0.0424094 rad, 77.47 s at the orbital rate.
    quiet = defence(magnetometer={"noise_nt": 6.2})  # 0.496 counts
    assert quiet.dead_axis_s == pytest.approx(2 * 77.47, abs=0.6)
    assert defence(magnetometer={"noise_nt": 6.3}).dead_axis_s == 68.0


def test_a_gyro_is_frozen_only_if_its_noise_moves_it():
    assert defence().gyro_frozen_s == 10.0
    assert defence(gyro={"noise_deg_s": 0.002}).gyro_frozen_s == 0.0  # 0.48 counts
    assert defence(gyro=None, control={"settle_by": "field"}).gyro_frozen_s == 0.0


def test_gyro_error():
    # 5 × 0.0764621 (see test_checks) + 4 × 360 / 5738.99 + 5 × 0.03 + √(4 + 9 + 4)/100 + 20.8327 × (0.3 + √0.03) in radians
    summed = 0.382311 + 0.250915 + 0.15 + 0.0412311 + 20.8327 * math.radians(0.3 + math.sqrt(0.03))
    assert defence().gyro_error_deg_s == 1.2, "control.wake_deg_s"
    assert defence(control={"wake_deg_s": 0.5}).gyro_error_deg_s == pytest.approx(summed, abs=1.1e-3)
    assert defence(control={"wake_deg_s": 5.0}).gyro_error_deg_s == 5.0
    assert defence(control={"wake_deg_s": 58.0}).gyro_error_deg_s == 0.0, "0.5 rad in 0.5 s are 57.3 °/s"
    assert defence(gyro=None, control={"settle_by": "field"}).gyro_error_deg_s == 0.0


def test_windows_follow_the_orbit():
    assert (defence().window_s, defence().pause_s) == (2869.5, 5739.0)
    plain = defence()
    assert (plain.divergence_guard, plain.growth_percent, plain.progress_percent, plain.retries) == (True, 5.0, 10.0, 3)
    assert plain.guard_deg_s == pytest.approx(1.1 * math.hypot(*load_mission(BASE).body.tip_off_deg_s), abs=0.01)


def test_current_sense():
    sense = load_mission(BASE).current_sense
    assert (sense.counts_at_full, sense.noise_counts, sense.off_counts, sense.weak_percent) == (1800, 4.0, 90, 50.0)
    assert load_mission(BASE, {"current_sense": None}).current_sense is None


def test_given_values_stay():
    given = {
        "jump_ut": 30.0, "noise_ut": 2.0, "frozen_s": 20.0, "dead_axis_s": 30.0, "gyro_frozen_s": 40.0, "gyro_error_deg_s": 3.0,
        "divergence_guard": False, "guard_deg_s": 25.0, "window_s": 100.0, "pause_s": 200.0, "growth_percent": 50.0, "progress_percent": 5.0,
        "retries": 0,
    }  # fmt: skip
    assert vars(defence(defence=given)) == given
