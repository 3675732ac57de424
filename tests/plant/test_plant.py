"""The whole plant, without a controller."""

import os
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from numpy._core._multiarray_umath import __cpu_dispatch__ as DISPATCHED
from plant.flight import alone, batch, digest, fly
from plant.tern_mission import FREE_BODY, IDEAL, MISSION, ideal_with
from scipy.integrate import solve_ivp
from scipy.spatial.transform import Rotation

from pyharness.plant import ConstantField, Plant
from pyharness.plant.plant import attitude_from_seed

ROOT = Path(__file__).parents[2]
FIELD = np.array((20e-6, -30e-6, 10e-6))[:, None]
ALIGNED = np.array((1.0, 0.0, 0.0, 0.0))[:, None]


def test_a_spacecraft_flies_alone_as_it_does_in_a_batch():
    together = fly(Plant(**batch()), 120)
    for i in range(4):
        single = fly(Plant(**alone(i)), 120)
        assert all(np.array_equal(a[:, i:i + 1], b) for a, b in zip(together, single, strict=True))


def test_a_run_can_be_split():
    plant = Plant(**batch())
    first = fly(plant, 70)
    middle = plant.snapshot()
    rest = fly(plant, 90)
    plant.restore(middle)
    again = fly(plant, 90)
    elsewhere = Plant(**batch())
    elsewhere.restore(middle)
    whole = fly(Plant(**batch()), 160)
    assert digest(rest) == digest(again) == digest(fly(elsewhere, 90))
    assert digest(first + rest) == digest(whole)


def test_a_snapshot_does_not_move_with_the_plant():
    plant = Plant(**batch())
    snapshot = plant.snapshot()
    fly(plant, 3)
    plant.restore(snapshot)
    plant.rate = np.zeros((3, 4))
    assert np.array_equal(snapshot.body[4:], batch()["rate_rad_s"])


@pytest.mark.parametrize("disabled", [[], list(DISPATCHED), ["AVX2", "FMA3", "AVX512F", "AVX512_SKX"]])
def test_the_same_bits_on_lesser_processors(disabled):
    """Numpy accepts only the names it was built to dispatch, and warns of the others."""
    environment = {**os.environ, "NPY_DISABLE_CPU_FEATURES": " ".join(disabled),
                   "PYTHONPATH": os.pathsep.join((str(ROOT), str(ROOT / "tests")))}
    run = subprocess.run([sys.executable, "-W", "ignore", "-m", "plant.flight"], env=environment, check=True,
                         capture_output=True, text=True)
    assert run.stdout.strip() == digest(fly(Plant(**batch()), 300))


@pytest.mark.parametrize("time_constant_ms", [1.0, 10.0])
@pytest.mark.parametrize("rate_deg_s", [(12.0, -11.0, 13.0), (40.0, -30.0, 33.0)])
def test_a_pulse_turns_the_body_as_its_exact_edges_do(time_constant_ms, rate_deg_s):
    """Rate gained in one cycle, through the cubic and through the exact pulse: they differ by 3e-6 of it at
    most."""
    ticks = np.array((2000, -700, 3500))[:, None]
    mission = replace(IDEAL, coil=tuple(replace(c, time_constant_ms=time_constant_ms) for c in IDEAL.coil))

    def plant():
        return Plant([mission], [0], field=ConstantField(FIELD), attitude=ALIGNED,
                     rate_rad_s=np.radians(rate_deg_s)[:, None])

    driven, free = plant(), plant()
    driven.drive(ticks)
    free.drive(ticks * 0)
    effect = np.linalg.norm(driven.rate - free.rate)
    assert effect > 1e-5
    assert np.linalg.norm(driven.rate[:, 0] - _with_exact_edges(plant(), mission, ticks)) <= 3e-6 * effect


def _with_exact_edges(plant, mission, ticks):
    j, coils = np.array(mission.body.inertia_kg_m2), plant.coils
    field = FIELD[:, 0]

    def slope(t, y):
        q, w = y[:4], y[4:]
        s, v = q[0], q[1:]
        b = field + 2.0 * np.cross(v, np.cross(v, field)) - 2.0 * s * np.cross(v, field)
        m = coils.waveform(ticks, np.array([t - 0.020]))[0, :, 0]
        q_dot = 0.5 * np.concatenate(([-v @ w], s * w + np.cross(v, w)))
        return np.concatenate((q_dot, np.linalg.solve(j, np.cross(m, b) - np.cross(w, j @ w))))

    y = np.concatenate((plant.attitude, plant.rate))[:, 0]
    edges = np.unique(np.concatenate(([0.0, 0.020, 0.5], 0.020 + np.abs(ticks[:, 0]) * 1e-4)))
    for start, end in zip(edges, edges[1:]):
        inside = (start + 1e-12, end - 1e-12)  # not on the edges themselves
        y = solve_ivp(slope, inside, y, method="DOP853", rtol=1e-12, atol=1e-15).y[:, -1]
    return y[4:]


def test_the_first_sample_comes_at_mid_sample_after_the_start():
    plant = Plant([MISSION], [0], start_s=np.array([60.0]), duration_s=60.0)
    assert plant.time_s == pytest.approx([60.07])
    plant.drive(np.zeros((3, 1), int))
    assert plant.time_s == pytest.approx([60.57])
    assert plant.cycle == 1


def test_it_starts_tipped_off_and_at_an_attitude_of_its_own():
    plant = Plant([MISSION] * 2, [1, 2], field=ConstantField(np.tile(FIELD, 2)))
    assert plant.rate == pytest.approx(np.radians([[12.0] * 2, [-11.0] * 2, [13.0] * 2]))
    assert np.linalg.norm(plant.attitude, axis=0) == pytest.approx(1.0, abs=1e-15)
    assert np.array_equal(plant.attitude[:, 1], attitude_from_seed(2))
    assert not np.allclose(plant.attitude[:, 0], plant.attitude[:, 1])


def test_attitudes_from_seeds_point_everywhere():
    q = np.array([attitude_from_seed(seed) for seed in range(2000)])
    assert np.abs(q.mean(axis=0)).max() < 4.0 * 0.5 / np.sqrt(2000)
    assert (q**2).mean(axis=0) == pytest.approx([0.25] * 4, abs=0.02)


def test_a_spin_along_the_field():
    plant = Plant([MISSION], [3], duration_s=10.0)
    plant.rate = plant.rate_along_field(0.2)
    assert np.linalg.norm(plant.rate) == pytest.approx(0.2)
    assert np.cross(plant.rate[:, 0], plant.field_body[:, 0]) == pytest.approx((0.0, 0.0, 0.0), abs=1e-19)
    assert plant.rate[:, 0] @ plant.field_body[:, 0] > 0


def test_counts_follow_the_truth():
    plant = Plant([IDEAL], [4], duration_s=100.0)
    for _ in range(20):
        sample = plant.sample()
        # 20 ms of averaging at 21 °/s take less than 3e-6 off; the rest is rounding.
        assert sample.mag_counts == pytest.approx(plant.field_body * 80e6, abs=0.52)
        assert sample.gyro_counts == pytest.approx(np.degrees(plant.rate) * 240.0, abs=0.51)
        plant.drive(np.zeros((3, 1), int))


def test_a_late_sample_sees_the_field_turned_on():
    """2 ms at 60 °/s, against the rotation itself."""
    fine = ideal_with(counts_per_ut=600.0, range_ut=50.0)
    rate = np.radians((-40.0, 30.0, 33.0))[:, None]
    plant = Plant([fine], [0], field=ConstantField(FIELD), attitude=ALIGNED, rate_rad_s=rate)
    for offset_s in (0.0, 2e-3, -2e-3):
        turned = Rotation.from_rotvec(rate[:, 0] * offset_s).inv().apply(FIELD[:, 0])
        assert plant.sample(np.array([offset_s])).mag_counts[:, 0] == pytest.approx(turned * 6e8, abs=0.6)
    assert np.linalg.norm(turned - FIELD[:, 0]) * 6e8 > 30.0


def test_reading_twice_gives_the_same_counts():
    plant = Plant([MISSION], [4], duration_s=100.0)
    first, second = plant.sample(), plant.sample()
    assert np.array_equal(first.mag_counts, second.mag_counts)
    plant.drive(np.zeros((3, 1), int))
    assert not np.array_equal(first.mag_counts, plant.sample().mag_counts)


def test_the_sensors_noises_are_their_own():
    noisy = ideal_with(noise_nt=1000.0)
    noisy = replace(noisy, gyro=replace(noisy.gyro, noise_deg_s=0.3))
    plant = Plant([noisy], [5], field=ConstantField(0.0 * FIELD), rate_rad_s=np.zeros((3, 1)))
    log = []
    for _ in range(200):
        sample = plant.sample()
        log.append(np.concatenate((sample.mag_counts, sample.gyro_counts))[:, 0])
        plant.drive(np.zeros((3, 1), int))
    assert np.std(log, axis=0) == pytest.approx([80.0] * 3 + [72.0] * 3, rel=0.2)
    assert np.abs(np.corrcoef(log, rowvar=False) - np.eye(6)).max() < 0.3


def test_a_pulse_is_seen_by_the_magnetometer_only_while_it_decays():
    loud = ideal_with(stray_ut_per_a_m2=((100.0, 0.0, 0.0), (0.0, 100.0, 0.0), (0.0, 0.0, 100.0)))
    still = {"field": ConstantField(0.0 * FIELD), "attitude": ALIGNED, "rate_rad_s": np.zeros((3, 1))}
    full, late = np.array((4000, 0, 0))[:, None], np.array((600, 0, 0))[:, None]
    plant = Plant([loud], [0], **still)
    plant.drive(full)
    assert plant.sample().mag_counts[0, 0] == 0  # 70 ms, 12 time constants
    plant.drive(full, late)
    # 10 ms after switch-off, averaged over 20 ms: 0.2 A m² · e^(−10/6) · 6/20 (1 − e^(−20/6)) · 100 µT per A
    # m².
    left = 0.2 * np.exp(-10 / 6) * 6 / 20 * -np.expm1(-20 / 6) * 100.0 * 80.0
    assert plant.sample().mag_counts[0, 0] == pytest.approx(left, abs=0.51)
    plant.drive(full * 0)
    assert plant.sample().mag_counts[0, 0] == 0


def test_remanence_is_seen_until_the_next_pulse():
    loud = ideal_with(stray_ut_per_a_m2=((1000.0, 0.0, 0.0), (0.0, 0.0, 0.0), (0.0, 0.0, 0.0)))
    cored = replace(loud, coil=tuple(replace(c, remanence_fraction=0.01) for c in loud.coil))
    plant = Plant([cored], [0], field=ConstantField(0.0 * FIELD), rate_rad_s=np.zeros((3, 1)))
    seen = []
    for ticks in (1000, 0, 0, -1000, 0):
        plant.drive(np.array((ticks, 0, 0))[:, None])
        seen.append(plant.sample().mag_counts[0, 0])
    assert seen == [160, 160, 160, -160, -160]


def test_a_dipole_along_minus_the_derivative_takes_energy_out_and_along_plus_puts_it_in():
    """m = −k dB/dt through the pulses: dB/dt = −ω × B."""
    for sign in (1, -1):
        rate = np.radians((0.5, -0.4, 0.3))[:, None]
        plant = Plant([IDEAL], [6], field=ConstantField(FIELD), rate_rad_s=rate)
        before = plant.energy()
        for _ in range(20):
            derivative = -np.cross(plant.rate[:, 0], plant.field_body[:, 0])[:, None]
            plant.drive(np.rint(-sign * 2e9 * derivative).astype(int))
        assert np.sign(before - plant.energy()) == sign
        assert abs(before - plant.energy()) > 1e-3 * before


def test_torque_free_flight_keeps_energy_and_momentum():
    plant = Plant([replace(MISSION, body=FREE_BODY)], [7], field=ConstantField(FIELD))
    energy, momentum = plant.energy(), plant.momentum_inertial()
    for _ in range(400):
        plant.drive(np.zeros((3, 1), int))
    assert plant.energy() == pytest.approx(energy, rel=1e-13)
    assert plant.momentum_inertial() == pytest.approx(momentum, rel=1e-12)


def test_a_dipole_moves_momentum_only_across_the_field():
    plant = Plant([replace(MISSION, body=FREE_BODY)], [7], field=ConstantField(FIELD))
    before = plant.momentum_inertial()
    for _ in range(100):
        plant.drive(np.array((1000, -500, 700))[:, None])
    change = (plant.momentum_inertial() - before)[:, 0]
    assert np.linalg.norm(change) > 1e-6
    assert abs(change @ FIELD[:, 0]) < 1e-6 * np.linalg.norm(change) * np.linalg.norm(FIELD)


def test_what_cannot_fly_is_refused():
    slow = replace(MISSION, cycle=replace(MISSION.cycle, period_ms=1000.0))
    with pytest.raises(ValueError, match="cycle.period_ms: 2 different values"):
        Plant([MISSION, slow], [0, 1], duration_s=10.0)
    with pytest.raises(ValueError, match="seeds"):
        Plant([MISSION], [0, 1], duration_s=10.0)
    with pytest.raises(ValueError, match="duration_s"):
        Plant([MISSION], [0])
