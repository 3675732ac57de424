"""Coils without a body: exact edges, moments, remanence, switch-off."""

import math
from dataclasses import replace

import numpy as np
import pytest
from plant.tern_mission import IDEAL, MISSION
from scipy.integrate import quad

from pyharness.mission.model import Cycle
from pyharness.plant.coils import Coils
from pyharness.plant.cycle import Timeline

TIMELINE = Timeline.of(IDEAL)


def column(*ticks: int) -> np.ndarray:
    return np.array(ticks)[:, None]


def drive(mission, ticks, late=None, state=None):
    coils = Coils([mission])
    return coils.drive(state or coils.at_rest(), column(*ticks), None if late is None else column(*late))


def with_time_constant(ms: float, mission=IDEAL):
    return replace(mission, coil=tuple(replace(c, time_constant_ms=ms) for c in mission.coil))


def mean(cubic: np.ndarray) -> np.ndarray:
    return sum(cubic[i] / (i + 1) for i in range(4))


@pytest.mark.parametrize("power", range(4))
@pytest.mark.parametrize("ticks", [8, 500, 4000])
def test_the_cubic_has_the_moments_of_the_exact_pulse(ticks, power):
    cubic = drive(IDEAL, (ticks, -ticks, ticks)).cubic[:, :, 0]
    delay, width, period = TIMELINE.delay_us * 1e-6, ticks * 1e-4, 0.5
    for axis, coil in enumerate(IDEAL.coil):
        seconds = np.array((0.0, width, width + 40 * coil.time_constant_ms * 1e-3))
        exact = sum(
            quad(lambda t, axis=axis: Coils([IDEAL]).waveform(column(ticks, -ticks, ticks), np.array([t]))[0, axis, 0]
                 * ((t + delay) / period) ** power, *piece, epsabs=1e-13, epsrel=1e-11)[0]
            for piece in zip(seconds, seconds[1:])
        ) / period
        moment = sum(cubic[i, axis] / (i + power + 1) for i in range(4))
        assert moment == pytest.approx(exact, rel=1e-9)


def test_mean_dipole_is_full_dipole_times_duty():
    """Whatever L/R: what the rise lacks, the tail makes up for."""
    for ms in (0.5, 6.0, 20.0):
        cubic = drive(with_time_constant(ms), (1000, 250, -4000)).cubic
        assert mean(cubic)[:, 0] == pytest.approx((0.2 * 0.2, 0.2 * 0.05, -0.2 * 0.8), rel=1e-9)


def test_no_ticks_no_dipole():
    result = drive(IDEAL, (0, 0, 0), late=(50, 50, 50))
    assert not result.cubic.any() and not result.state.remaining.any() and not result.switch_off_us.any()


def test_signs_of_current_and_polarity():
    result = drive(MISSION, (100, 100, -100))
    assert np.sign(mean(result.cubic)[:, 0]).tolist() == [1.0, -1.0, -1.0]  # y has polarity −1
    opposite = drive(MISSION, (-100, -100, 100))
    assert np.array_equal(result.cubic, -opposite.cubic)
    assert np.array_equal(result.state.remaining, -opposite.state.remaining)
    assert np.array_equal(result.state.remanence, -opposite.state.remanence)


def test_current_is_one_percent_after_4_605_time_constants():
    """Closed form I0 exp(−t R/L), through the table that the magnetometer sees."""
    # The sample lasts 1 µs, so that its mean is its value; the pulse is 50 τ long, so that it is full.
    for decay, left in ((4.605, 0.01), (6.908, 0.001)):
        age_us = round(decay * 1000)
        cycle = Cycle(100.0, 20.0, 0.001, 0.0, 70.0, 1, 0.1, 1.0)
        mission = replace(with_time_constant(1.0), cycle=cycle)
        ticks = Timeline.of(mission).age_at_next_sample_us(0) - age_us
        remaining = Coils([mission]).drive(
            Coils([mission]).at_rest(), column(70_000, 0, 0), column(ticks - 70_000, 0, 0)).state.remaining
        assert remaining[0, 0] == pytest.approx(0.2 * left, rel=2e-3)


@pytest.mark.parametrize("ticks", [8, -300, 3000, -4000])
def test_remaining_dipole_is_the_mean_of_the_exact_tail_over_the_sample(ticks):
    mission = with_time_constant(30.0)
    start = TIMELINE.age_at_next_sample_us(0) * 1e-6
    exact = quad(lambda t: Coils([mission]).waveform(column(ticks, 0, 0), np.array([t]))[0, 0, 0],
                 start, start + 0.02, epsabs=1e-15)[0] / 0.02
    assert drive(mission, (ticks, 0, 0)).state.remaining[0, 0] == pytest.approx(exact, rel=1e-6, abs=2e-12)


def test_waveform_rises_and_decays_exponentially():
    wave = Coils([IDEAL]).waveform(column(1000, -1000, 0), np.array((-0.01, 0.0, 0.006, 0.1, 0.106)))[:, :, 0]
    full = 0.2 * -math.expm1(-0.1 / 0.006)
    expected = (0.0, 0.0, 0.2 * (1 - math.exp(-1)), full, full * math.exp(-1))
    assert wave[:, 0] == pytest.approx(expected, abs=1e-12)
    assert wave[3, 1] == pytest.approx(-full)
    assert not wave[:, 2].any()


def test_supply_voltage_scales_the_dipole():
    coils = Coils([IDEAL, IDEAL], np.array((7.4, 3.7)))
    assert coils.full_dipole[:, 0] == pytest.approx(2.0 * coils.full_dipole[:, 1])


def test_remanence_keeps_the_sign_of_the_last_pulse():
    coils = Coils([MISSION])
    after = coils.drive(coils.at_rest(), column(-1000, 1000, 1000))
    # 0.4 % of full, y by polarity −1; the air coil keeps none.
    assert after.state.remanence[:, 0] == pytest.approx((-0.00096, -0.00096, 0.0), rel=1e-6)
    idle = coils.drive(after.state, column(0, 0, 0))
    assert np.array_equal(idle.state.remanence, after.state.remanence)
    assert idle.cubic[0, :, 0] == pytest.approx(after.state.remanence[:, 0], abs=1e-18)
    assert np.abs(idle.cubic[1:]).max() < 1e-18
    turned = coils.drive(idle.state, column(1000, 0, 0))
    assert turned.state.remanence[:2, 0] == pytest.approx((0.00096, -0.00096), rel=1e-6)


def test_a_pulse_too_short_to_reach_full_current_leaves_less_remanence():
    kept = drive(MISSION, (10, 0, 0)).state.remanence[0, 0]
    assert kept == pytest.approx(0.00096 * -math.expm1(-1.0 / 6.0), rel=1e-9)


def test_the_old_remanence_acts_before_a_pulse_and_the_new_after_it():
    coils = Coils([MISSION])
    before = coils.drive(coils.at_rest(), column(-2000, 0, 0)).state
    cubic = coils.drive(before, column(2000, 0, 0)).cubic[:, 0, 0]
    pulse_alone = drive(IDEAL, (2000, 0, 0)).cubic[:, 0, 0] * 0.24 / 0.2
    # 20 ms of the old, 280 ms of the new, of 500 ms.
    assert mean(cubic - pulse_alone) == pytest.approx(0.00096 * (280 - 20) / 500, rel=1e-6)


def test_late_switch_off_is_stamped_and_lengthens_the_pulse():
    late = drive(MISSION, (1000, -1000, 0), late=(37, 0, 5))
    assert late.switch_off_us[:, 0].tolist() == [103_700, 100_000, 0]
    longer = drive(MISSION, (1037, -1000, 0))
    assert np.array_equal(late.cubic, longer.cubic)
    assert np.array_equal(late.state.remaining, longer.state.remaining)


def test_what_cannot_be_driven_is_refused():
    with pytest.raises(ValueError, match=r"^ticks: pulse of 4001 ticks on y of spacecraft 0, .* \[0, 4000\]"):
        drive(MISSION, (0, -4001, 0))
    drive(MISSION, (4000, 0, 0), late=(700, 0, 0))
    with pytest.raises(ValueError, match=r"late_ticks: pulse of 4701 ticks on x .* \[0, 4700\]"):
        drive(MISSION, (4000, 0, 0), late=(701, 0, 0))
    with pytest.raises(ValueError, match="late_ticks"):
        drive(MISSION, (10, 0, 0), late=(-11, 0, 0))
