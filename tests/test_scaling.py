"""From SI units to integers."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from fsw_c.runs import Bank

from pyharness import exact
from pyharness.describe import describe_config
from pyharness.gain import gain_of, recommended_gain_n_m_s, rms_field_t
from pyharness.mission import MissionError, demo_path, load_mission, mission_path
from pyharness.plant.sensors import rotation_matrix
from pyharness.scaling import _agreement, _mantissa, scale


def scaled(**control):
    return scale(load_mission(demo_path(), {"control": control}))


def with_tables(mission="demo", **tables):
    return scale(load_mission(mission_path(mission), tables))


def path_of(**tables):
    return with_tables(**tables).config["path"]


def test_the_controller_accepts_the_integers(library, demo_scaling):
    assert exact.init(demo_scaling.config) == 0
    assert library.init(Bank(library, demo_scaling.config).config[0]) == 0


def test_mantissas_are_full_and_close():
    for value in (1.0, 0.999999, 65535.4 / 2**7, 65535.6 / 2**7, 3e-5, 12345.678):
        mantissa, shift = _mantissa(value)
        assert 32768 <= mantissa <= 65535
        assert mantissa / 2.0**shift == pytest.approx(value, rel=2**-16)


@pytest.mark.parametrize("scaling", ["constant", "normalised"])
def test_the_gain_in_counts_is_the_gain_in_si(scaling):
    """m = −k dB/dt worked through by hand: one field count a period, in command counts."""
    s = scaled(gain_scaling=scaling)
    gain = s.config["path"]["derivative_gain"]
    for axis in range(3):
        in_counts = gain["mantissa"][axis] / 2.0 ** gain["shift"][axis]
        dipole = in_counts * s.dipole_a_m2[axis] / 32768
        field_rate = s.field_t / s.period_s
        if scaling == "normalised":  # at ‖B‖ = 30 µT
            dipole /= (30e-6 / s.field_t) ** 2
            assert dipole == pytest.approx(s.gain.K_n_m_s / 30e-6**2 * field_rate, rel=2**-15)
        else:
            assert dipole == pytest.approx(s.gain.k_am2_s_per_t * field_rate, rel=2**-15)


def test_the_rate_gain_in_counts_is_the_same_gain():
    s = scaled(law="rate")
    gain = s.config["path"]["rate_gain"]
    for axis in range(3):
        per_cross = gain["mantissa"][axis] / 2.0 ** (16 + gain["shift"][axis])
        dipole = per_cross * s.dipole_a_m2[axis] / 32768
        assert dipole == pytest.approx(s.gain.k_am2_s_per_t * s.rate_rad_s * s.field_t, rel=2**-15)


def test_the_limit_is_the_mean_over_the_cycle(demo_scaling):
    share = demo_scaling.timeline.drive_window_us / demo_scaling.timeline.period_us
    for coil, limit in zip(demo_scaling.mission.coil, demo_scaling.dipole_a_m2, strict=True):
        assert limit == coil.dipole_a_m2 * share


def test_calibration_undoes_the_sensor(library, demo, demo_scaling):
    """Raw counts made by the sensor's definition come back as the field, within rounding, through the C."""
    rotation = np.array(rotation_matrix(demo.magnetometer.misalignment_deg))
    field_ut = np.array([21.0, -33.0, 12.5])
    sensed = rotation.T @ field_ut + np.array(demo.magnetometer.bias_ut)
    raw = np.rint(sensed * demo.magnetometer.counts_per_ut).astype(int)
    inputs = {"path": {"mag_raw": tuple(raw.tolist()), "mag_valid": 1, "sample_us": 70_000}}
    field = Bank(library, demo_scaling.config).run([inputs])["trace"]["calibration"]["field"][0]
    np.testing.assert_allclose(field * demo_scaling.field_t * 1e6, field_ut, atol=1.5 / demo.magnetometer.counts_per_ut)


def test_full_scale_of_the_rate_is_a_quarter_above_tip_off(demo, demo_scaling):
    assert demo_scaling.rate_rad_s * 32767 == pytest.approx(1.25 * math.radians(math.hypot(*demo.body.tip_off_deg_s)))


def test_the_low_pass_pole():
    """Pole of a sampled first-order low-pass: exp(−T/τ)."""
    assert scaled(low_pass_s=0.0).config["path"]["filter_gain"] == 32768
    s = scaled(low_pass_s=2.0)
    assert 1 - s.config["path"]["filter_gain"] / 32768 == pytest.approx(math.exp(-s.period_s / 2.0), abs=2**-16)


def test_recommended_gain():
    """Avanzini & Giulietti, JGCD 35(4), 2012 (formula from memory): K = 2 n (1 + sin ξ) Jmin; 550 km, ξ = 97.6°, J = .04."""
    ball = {"xx": 0.04, "yy": 0.04, "zz": 0.04, "xy": 0.0, "xz": 0.0, "yz": 0.0}
    mission = load_mission(demo_path(), {"body": {"inertia_kg_m2": ball}, "control": {"K_n_m_s": None, "gain": "auto"}})
    assert recommended_gain_n_m_s(mission) == pytest.approx(1.744e-4, rel=5e-4)
    gain = gain_of(mission)
    assert gain.K_n_m_s == recommended_gain_n_m_s(mission)
    # The unit trap: k = K / ‖B‖². At 33.78 µT that is 1.53e5.
    assert gain.K_n_m_s / 33.78e-6**2 == pytest.approx(1.53e5, rel=2e-3)
    assert gain.k_am2_s_per_t * gain.rms_field_t**2 == pytest.approx(gain.K_n_m_s)


def test_rms_field_of_a_dipole():
    """Equatorial orbit: the equatorial field. Polar orbit: √2.5 of it (mean of 1 + 3 sin² over a circle)."""
    above = 550 + 6371.2 - 6378.137  # 550 km above the sphere that the dipole is given for
    equatorial = load_mission(demo_path(), {"orbit": {"inclination_deg": 0.0, "altitude_km": above}})
    polar = load_mission(demo_path(), {"orbit": {"inclination_deg": 90.0, "altitude_km": above}})
    # Centred dipole: Wertz (ed.), Spacecraft Attitude Determination and Control, 1978, App. H (from memory).
    assert rms_field_t(equatorial) == pytest.approx(23193e-9, rel=3e-5)
    assert rms_field_t(polar) / rms_field_t(equatorial) == pytest.approx(math.sqrt(2.5), rel=1e-9)


def test_a_gain_that_would_lose_its_mantissa_is_refused():
    for k, scaling in ((1e-3, "constant"), (9e8, "constant"), (1e-3, "normalised"), (9e8, "normalised")):
        with pytest.raises(MissionError) as caught:
            scaled(K_n_m_s=None, k_am2_s_per_t=k, gain_scaling=scaling)
        problems = caught.value.problems
        assert "control.k_am2_s_per_t" in problems[0] and "mantissa would be lost" in problems[0], problems
        low, high = problems[0].split("[")[1].split("]")[0].split(",")
        unit = "N m s" if scaling == "normalised" else "A m² s/T"
        assert problems[0].endswith(unit)
        for legal in (float(low), float(high)):  # the range it names is legal
            scaled(**({"K_n_m_s": legal} if scaling == "normalised" else {"K_n_m_s": None, "k_am2_s_per_t": legal}),
                   gain_scaling=scaling)  # fmt: skip


def test_thresholds_of_the_field_in_counts():
    """Of 62.4 µT, full scale of 32767 counts."""
    path = path_of(defence={"jump_ut": 20.0, "noise_ut": 0.5})
    assert math.sqrt(path["jump_max_sq"]) == pytest.approx(20.0 / 62.4 * 32767, abs=0.01)
    assert path["noise_limit"] == round(0.5 / 62.4 * 32767)
    widest = path_of(defence={"jump_ut": 1000.0, "noise_ut": 1000.0})
    assert (widest["jump_max_sq"], widest["noise_limit"]) == (3 * 32767**2, 65535)
    assert 3 * 32767**2 == 3221028867


def test_times_in_cycles():
    path = path_of(defence={"frozen_s": 8.6, "dead_axis_s": 100.0, "gyro_frozen_s": 0.0})
    assert (path["frozen_limit"], path["dead_limit"], path["gyro_frozen_limit"]) == (18, 200, 0)
    assert 0.8 / (200_000 * 1e-6) > 4, "a little more than 4 in binary"
    short = {"period_ms": 200.0, "drive_window_ms": 100.0}
    assert path_of(cycle=short, defence={"gyro_frozen_s": 0.8})["gyro_frozen_limit"] == 4
    supervisor = with_tables(defence={"window_s": 1000.2, "pause_s": 60.0}).config["supervisor"]
    assert (supervisor["window_cycles"], supervisor["pause_cycles"]) == (2001, 120)


def test_agreement_in_counts(demo_scaling):
    """One rate count across one field count, seen in the change of the field: ω B T by hand."""
    s = demo_scaling
    path = s.config["path"]
    change_t = s.rate_rad_s * 1000 * s.field_t * 2000 * s.period_s
    cross = 1000 * 2000
    counts = cross * path["agree_mantissa"] / 2.0 ** (16 + path["agree_shift"])
    assert counts * s.field_t == pytest.approx(change_t, rel=2**-15)
    assert path["agree_limit"] * s.field_t == pytest.approx(math.radians(1.2) * 62.4e-6 * s.period_s, rel=2e-3)
    assert path["agree_rate_max"] == 32767  # 0.5 rad in 0.5 s are more than the 23.9 °/s of full scale
    fast = path_of(body={"tip_off_deg_s": [60.0, 0.0, 0.0]}, gyro={"counts_per_deg_s": 200.0})
    assert fast["agree_rate_max"] == round(32767 * math.degrees(1.0) / 75.0)


def test_what_is_not_fitted_is_not_watched():
    blind = path_of(gyro=None, control={"settle_by": "field"})
    names = ("gyro_frozen_limit", "agree_limit", "agree_mantissa", "agree_shift", "agree_rate_max")
    assert [blind[name] for name in names] == [0, 0, 32768, 31, 1]
    names = ("current_fitted", "current_ticks", "current_min", "current_off_max")
    assert [blind[name] for name in names] == [0, 1, (2, 2, 2), 1]
    assert path_of(defence={"gyro_error_deg_s": 0.0})["agree_limit"] == 0


def test_a_tumble_too_slow_for_the_comparison_goes_without():
    """2^-31 as the least factor: a rate count of 2.3e-10 rad a period, 3.5e-4 °/s at tip-off with 50 ms."""
    config = load_mission(demo_path())
    slow = replace(config, body=replace(config.body, tip_off_deg_s=(2e-5, 0.0, 0.0)))
    path = _agreement(replace(scale(config), mission=slow, rate_rad_s=1e-11))
    assert path == {"agree_limit": 0, "agree_mantissa": 32768, "agree_shift": 31, "agree_rate_max": 1}


def test_current_sense_in_counts():
    s = with_tables("plover", current_sense={"off_counts": 40})
    path = s.config["path"]
    assert path["current_fitted"] == 1
    assert path["current_ticks"] == 105  # 3 × 0.7 ms in ticks of 20 µs
    # 900 × 3.1 / 3.7 × (1 − e⁻³) × 50 %
    assert path["current_min"] == (round(900 * 3.1 / 3.7 * 0.950213 * 0.5),) * 3
    assert path["current_off_max"] == 40
    assert s.size_of("current_driven[1]").value(450) == pytest.approx(50.0)
    assert with_tables().size_of("current_driven[1]") is None


def test_progress_in_q8():
    def supervisor(**defence):
        return with_tables(defence=defence).config["supervisor"]

    usual = supervisor()
    # Chords of the turn in half a second: at 1.1 × 19.105 °/s, rounded up, and at 0.5 °/s. 5 % more, 10 % less.
    assert usual["guard_turn"] == round(2**16 * math.sin(math.radians(21.02 / 4))) == 6002
    assert usual["stall_turn"] == round(2**16 * math.sin(math.radians(0.5 / 4))) == 143
    assert (usual["growth"], usual["progress"], usual["retries"]) == (round(1.05 * 256), round(0.9 * 256), 3)
    least = supervisor(divergence_guard=False, growth_percent=0.4, progress_percent=1e-9, retries=0)
    assert (least["guard_turn"], least["growth"], least["progress"], least["retries"]) == (65535, 257, 256, 0)
    most = supervisor(growth_percent=300.0, progress_percent=99.0, retries=1000)
    assert (most["growth"], most["progress"], most["retries"]) == (1024, 3, 1000)
    assert supervisor(guard_deg_s=360.0)["guard_turn"] == supervisor(guard_deg_s=400.0)["guard_turn"] == 65535  # half a turn, and more


@pytest.mark.parametrize("mission", ["demo", "plover"])
def test_every_defence_is_told_in_words(library, mission):
    s = with_tables(mission)
    told = {row.name: row.value for row in describe_config(s, library.interface)}
    mute = {"path.gyro_fitted", "path.polarity", "path.agree_shift", "supervisor.retries", "supervisor.bench_key"}
    factors = (".shift", "estimate_shift", "estimate_mantissa")
    assert {name for name, value in told.items() if not value and not name.endswith(factors)} <= mute
    if mission == "plover":
        assert told["path.agree_limit"] == "off" and told["path.agree_rate_max"] == "not compared"
        assert told["path.current_ticks"] == "2.1 ms" and told["path.current_off_max"] == "5 % of full current"
        return
    assert told["path.jump_max_sq"] == "16 µT" and told["path.dead_limit"] == "68 s"
    assert told["path.current_min"] == "not fitted"
    assert told["supervisor.growth"] == "diverging at 5.078 % more than a window before"  # 269 / 256
    assert told["supervisor.guard_turn"] == "21.02 °/s" and told["supervisor.stall_turn"] == "0.5001 °/s"


@pytest.mark.parametrize(
    ("extreme", "tables"),
    [
        ("short", {"cycle": {"period_ms": 100.0, "blanking_ms": 20.0, "sample_ms": 10.0, "compute_delay_ms": 5.0,
                             "drive_window_ms": 60.0}, "control": {"bench_limit_ms": 10.0}}),
        ("coarse", {"magnetometer": {"counts_per_ut": 0.2, "noise_nt": 5e3}}),
        ("fine", {"magnetometer": {"counts_per_ut": 160.0, "noise_nt": 0.0, "stray_ut_per_a_m2": [[0.0] * 3] * 3}}),
        ("slow", {"body": {"tip_off_deg_s": [0.3, 0.0, 0.0]}, "control": {"settled_deg_s": 0.3, "wake_deg_s": 0.5}}),
    ],
)  # fmt: skip
def test_defaults_of_unusual_missions_are_accepted(extreme, tables):
    assert exact.init(with_tables(**tables).config) == 0, extreme


def test_every_size_is_positive_and_named(library, demo_scaling):
    from pyharness.flight.records import columns

    for column in columns(library.interface.inputs) + columns(library.interface.outputs):
        size = demo_scaling.size_of(column)
        assert size is None or (size.step > 0 and size.unit)
    assert demo_scaling.size_of("trace.saturation.command[2]").unit == "mA m²"
    assert demo_scaling.size_of("command") is None
