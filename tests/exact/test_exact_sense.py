"""Stages 1, 2, 4, 6 and 7 on numbers worked out by hand from the arithmetic document, on both sides of comparisons."""

import pytest
from exact.samples import FIELD, SENSOR, path_config, path_inputs, path_state

from pyharness.exact import path_commit, path_reset, path_sense
from pyharness.exact.calibration import calibrate_sensor
from pyharness.exact.constants import (
    MRD_S_BLANKED,
    MRD_S_DERIVATIVE_CLAMPED,
    MRD_S_FIELD_IMPLAUSIBLE,
    MRD_S_GYRO_MISSING,
    MRD_S_GYRO_RANGE,
    MRD_S_INTERVAL_LONG,
    MRD_S_INTERVAL_SHORT,
    MRD_S_MAG_RANGE,
    MRD_S_NO_PREVIOUS,
    MRD_S_SAMPLE_MISSING,
    MRD_S_SAMPLE_OFF_TIME,
    MRD_S_SWITCH_OFF_UNSTAMPED,
)
from pyharness.exact.derivative import factor_of
from pyharness.exact.low_pass import follow


def sense(state=None, config=None, inputs=None, waive=0):
    return path_sense(state or path_state(), config or path_config(), inputs or path_inputs(), waive)


def raised(status, *numbers):
    """Whether the status word holds exactly these bits."""
    return status == sum(1 << number for number in numbers)


# ---- stage 1 ----

def test_calibration_by_hand():
    sensor = {"matrix": (3, 0, 0, 0, 1, 0, 1, 1, 1), "offset": (1, -2, 0), "shift": 1, "limit": 100}
    # 15/2 = 7.5 → 8, minus 1; -3/2 = -1.5 → -2, plus 2; 6/2 = 3
    assert calibrate_sensor(sensor, (5, -3, 4)) == ((7, 0, 3), False)


@pytest.mark.parametrize(("raw", "expected"), [
    ((99, -99, 0), ((99, -99, 0), False)),
    ((100, 0, 0), ((0, 0, 0), True)),
    ((0, -100, 0), ((0, 0, 0), True)),
    ((0, 0, 100), ((0, 0, 0), True)),
])
def test_a_raw_count_at_its_limit_is_out_of_range(raw, expected):
    assert calibrate_sensor({**SENSOR, "limit": 100}, raw) == expected


def test_the_least_count_is_always_out_of_range():
    assert calibrate_sensor(SENSOR, (-32768, 0, 0)) == ((0, 0, 0), True)


@pytest.mark.parametrize(("offset", "expected"),
    [(0, (32767, False)), (-1, (32767, True)), (1, (32766, False))])
def test_a_value_beyond_its_range_is_clamped_and_said(offset, expected):
    sensor = {**SENSOR, "matrix": (32767, 0, 0, 0, 2, 0, 0, 0, 2), "offset": (offset, 0, 0)}
    (x, _, _), out_of_range = calibrate_sensor(sensor, (2, 0, 0))
    assert (x, out_of_range) == expected


def test_missing_and_out_of_range_samples():
    _, trace, status = sense(inputs=path_inputs(mag_valid=0, gyro_valid=0, switch_off_us=(1_000_000,) * 3))
    assert raised(status, MRD_S_SAMPLE_MISSING, MRD_S_GYRO_MISSING)
    assert trace["calibration"] == {"field": (0, 0, 0), "rate": (0, 0, 0), "rate_valid": 0}
    _, trace, status = sense(inputs=path_inputs(mag_raw=(32767, 0, 0), gyro_raw=(0, 0, -32767)))
    assert raised(status, MRD_S_MAG_RANGE, MRD_S_GYRO_RANGE)  # without a norm there is none to be implausible
    assert (trace["plausibility"]["norm_sq"], trace["gate"]["trusted"]) == (0, 0)
    _, trace, status = sense(config=path_config(gyro_fitted=0),
        inputs=path_inputs(gyro_raw=(1, 2, 3), gyro_valid=1))
    assert raised(status, MRD_S_NO_PREVIOUS) and trace["calibration"]["rate"] == (0, 0, 0)
    _, trace, _ = sense(inputs=path_inputs(gyro_raw=(1, 2, 3), gyro_valid=65535))
    assert trace["calibration"] == {"field": FIELD, "rate": (1, 2, 3), "rate_valid": 1}


# ---- stage 2 ----

NORM_SQ = 129_000_000  # 10000² + 5000² + 2000²


@pytest.mark.parametrize(("limits", "plausible"), [
    ((NORM_SQ, NORM_SQ), True), ((NORM_SQ + 1, NORM_SQ + 1), False),
    ((32768, NORM_SQ - 1), False), ((32768, NORM_SQ), True),
])
def test_norm_against_its_plausible_range(limits, plausible):
    config = path_config(norm_min_sq=limits[0], norm_max_sq=limits[1])
    _, trace, status = sense(config=config)
    assert trace["plausibility"] == {"norm_sq": NORM_SQ, "norm": 11_357}  # 11357² = 128 981 449
    assert trace["gate"]["trusted"] == plausible
    assert raised(status, MRD_S_NO_PREVIOUS if plausible else MRD_S_FIELD_IMPLAUSIBLE)


def test_a_waived_norm_is_reported_but_does_not_reject():
    _, trace, status = sense(config=path_config(norm_max_sq=NORM_SQ - 1), waive=1)
    assert trace["gate"]["trusted"] == 1 and raised(status, MRD_S_FIELD_IMPLAUSIBLE, MRD_S_NO_PREVIOUS)


# ---- stage 4 ----

@pytest.mark.parametrize(("tolerance", "departure", "at_place"), [
    (500, 500, True), (500, 501, False), (500, -500, True), (500, -501, False), (0, 0, True), (0, 1, False),
    (0, -1, False),
])
@pytest.mark.parametrize("cycle_start", [5_000_000, 2**32 - 40_000, 2**32 - 39_600])
def test_place_in_the_cycle(tolerance, departure, at_place, cycle_start):
    inputs = path_inputs(
        cycle_start_us=cycle_start,
        sample_us=(cycle_start + 40_000 + departure) % 2**32,
        switch_off_us=((cycle_start - 50_000) % 2**32,) * 3,
    )
    _, trace, status = sense(config=path_config(tolerance_us=tolerance), inputs=inputs)
    assert trace["gate"]["trusted"] == at_place
    assert raised(status, MRD_S_NO_PREVIOUS if at_place else MRD_S_SAMPLE_OFF_TIME)


@pytest.mark.parametrize("coil", range(3))
@pytest.mark.parametrize(("margin", "clear"), [(0, 1), (-1, 0), (1, 1)])
@pytest.mark.parametrize("sample_us", [1_140_000, 20_000])
def test_blanking_counts_from_the_switch_off_to_the_start_of_the_sample(coil, margin, clear, sample_us):
    ages = [40_000, 41_000, 43_000]
    ages[coil] += margin
    inputs = path_inputs(
        sample_us=sample_us,
        cycle_start_us=(sample_us - 40_000) % 2**32,
        switch_off_us=tuple((sample_us - 2_000 - age) % 2**32 for age in ages),
    )
    state, trace, status = sense(inputs=inputs)
    assert trace["gate"] == {"age_us": tuple(ages), "trusted": clear}
    assert state["off_clear"] == tuple(clear if i == coil else 1 for i in range(3))
    assert raised(status, MRD_S_NO_PREVIOUS if clear else MRD_S_BLANKED)


@pytest.mark.parametrize(("age", "clear"), [(2**31 - 1, 1), (2**31, 0), (2**32 - 1, 0)])
def test_an_age_of_half_the_wrap_lies_in_the_future(age, clear):
    inputs = path_inputs()
    stamp = (inputs["sample_us"] - 2_000 - age) % 2**32
    state, trace, _ = sense(inputs={**inputs, "switch_off_us": (stamp,) * 3})
    assert trace["gate"] == {"age_us": (age,) * 3, "trusted": clear} and state["off_clear"] == (clear,) * 3


def test_an_old_switch_off_stays_clear_when_its_stamp_has_wrapped():
    first = path_inputs()
    state, _, _ = sense(inputs=first)
    later = path_inputs(cycle=30_000, switch_off_us=first["switch_off_us"])  # 50 minutes
    assert (later["sample_us"] - first["switch_off_us"][0]) % 2**32 >= 2**31
    _, trace, _ = sense(state, inputs=later)
    assert trace["gate"] == {"age_us": (2**31 - 1,) * 3, "trusted": 1}


def test_an_unchanged_stamp_that_was_blanked_ages_on():
    early = path_inputs(switch_off_us=(path_inputs()["sample_us"] - 3_000,) * 3)
    state, trace, _ = sense(inputs=early)
    assert trace["gate"] == {"age_us": (1_000,) * 3, "trusted": 0}
    _, trace, _ = sense(state, inputs=path_inputs(2, switch_off_us=early["switch_off_us"]))
    assert trace["gate"] == {"age_us": (101_000,) * 3, "trusted": 1}


def driven(ticks=(1, -1, 1), cycle=1):
    """A path that sensed in this cycle, and whose coils are then driven from 45 ms on; and what it saw."""
    inputs = path_inputs(cycle)
    state, _, _ = sense(inputs=inputs)
    return path_commit(state, path_config(), inputs, ticks), inputs


@pytest.mark.parametrize("coil", range(3))
def test_a_driven_coil_needs_a_new_stamp(coil):
    state, first = driven(tuple(-1 if i == coil else 0 for i in range(3)))
    after, trace, status = sense(state, inputs=path_inputs(2, switch_off_us=first["switch_off_us"]))
    assert raised(status, MRD_S_SWITCH_OFF_UNSTAMPED, MRD_S_BLANKED) and trace["gate"]["trusted"] == 0
    assert after["off_clear"] == tuple(0 if i == coil else 1 for i in range(3))
    assert after["pending"] == tuple(1 if i == coil else 0 for i in range(3))
    assert trace["gate"]["age_us"] == (148_000,) * 3
    after, trace, _ = sense(state, inputs=path_inputs(2))
    assert trace["gate"]["trusted"] == 1 and after["pending"] == (0, 0, 0) and after["off_clear"] == (1, 1, 1)


@pytest.mark.parametrize(("after_opening", "stamped"), [
    (-50_000, False), (-1, False), (0, True), (1, True), (2**31 - 1, True), (2**31, False),
])
@pytest.mark.parametrize("cycle", [1, 42_939])
def test_a_stamp_from_before_the_pulse_does_not_clear_it(after_opening, stamped, cycle):
    """On both sides of the window's opening and of half the wrap; once it opens 22 ms before the wrap."""
    state, first = driven(cycle=cycle)
    opens = state["drive_us"][0]
    assert cycle == 1 or opens == 2**32 - 22_296 - path_config()["tolerance_us"]
    stamps = ((opens + after_opening) % 2**32,) * 3
    state, trace, status = sense(state, inputs=path_inputs(cycle + 1, switch_off_us=stamps))
    assert stamps != first["switch_off_us"] and status >> MRD_S_SWITCH_OFF_UNSTAMPED & 1 == (not stamped)
    assert state["pending"] == (int(not stamped),) * 3
    in_future = after_opening > 1
    assert trace["gate"]["trusted"] == (stamped and not in_future)


def test_an_unchanged_stamp_does_not_clear_a_pulse_even_from_after_its_window():
    ahead = path_inputs(1, switch_off_us=(1_150_000,) * 3)
    state, _, _ = sense(inputs=ahead)
    state = path_commit(state, path_config(), ahead, (1, 1, 1))
    assert state["drive_us"] == (1_145_000 - path_config()["tolerance_us"],) * 3  # the window may open that much early
    state, _, status = sense(state, inputs=path_inputs(2, switch_off_us=ahead["switch_off_us"]))
    assert raised(status, MRD_S_SWITCH_OFF_UNSTAMPED, MRD_S_BLANKED) and state["pending"] == (1, 1, 1)


def test_frozen_stamps_block_until_one_is_refreshed():
    state, first = driven((0, 1, 0))
    for cycle in (2, 3, 40, 30_000, 60_000):  # beyond half the wrap, and beyond the wrap
        state, trace, status = sense(state, inputs=path_inputs(cycle, switch_off_us=first["switch_off_us"]))
        assert raised(status, MRD_S_SWITCH_OFF_UNSTAMPED, MRD_S_BLANKED) and trace["gate"]["trusted"] == 0
        assert state["pending"] == (0, 1, 0)
    state, first = driven((0, 1, 0))
    for cycle in range(2, 12):  # stale ones that move on, but never past the opening of the window
        stamps = tuple(stamp + cycle for stamp in first["switch_off_us"])
        state, _, status = sense(state, inputs=path_inputs(cycle, switch_off_us=stamps))
        assert status >> MRD_S_SWITCH_OFF_UNSTAMPED & 1 and state["off_clear"] == (1, 0, 1)
    state, trace, status = sense(state, inputs=path_inputs(12))
    assert raised(status, MRD_S_NO_PREVIOUS) and trace["gate"]["trusted"] == 1
    assert state["pending"] == (0, 0, 0)


def test_a_stamp_refreshed_without_a_pulse_counts_as_a_switch_off():
    state, _, _ = sense()
    young = path_inputs(2)["sample_us"] - 2_000 - 42_999
    state, _, status = sense(state, inputs=path_inputs(2, switch_off_us=(young,) * 3))
    assert raised(status, MRD_S_BLANKED) and state["off_clear"] == (1, 1, 0)  # 43 ms are needed on z alone
    _, trace, _ = sense(state, inputs=path_inputs(3))
    assert trace["gate"]["trusted"] == 1


def test_a_pulse_stamped_too_late_for_its_sample_is_blanked_but_no_longer_pending():
    state, _ = driven()
    late = path_inputs(2)["sample_us"] - 3_000
    state, _, status = sense(state, inputs=path_inputs(2, switch_off_us=(late,) * 3))
    assert raised(status, MRD_S_BLANKED) and (state["pending"], state["off_clear"]) == ((0, 0, 0), (0, 0, 0))
    _, trace, _ = sense(state, inputs=path_inputs(3, switch_off_us=(late,) * 3))
    assert trace["gate"]["trusted"] == 1


def test_a_pulse_is_stamped_also_while_nothing_is_known_of_the_coils():
    state = path_state(off_known=0, pending=(1, 1, 1), drive_us=(1_045_000, 1_090_000, 1_090_001))
    state, _, status = sense(state, inputs=path_inputs(1, switch_off_us=(1_090_000,) * 3))
    assert raised(status, MRD_S_BLANKED)
    assert (state["pending"], state["off_clear"], state["off_known"]) == ((0, 0, 1), (0, 0, 0), 1)


def test_a_pending_pulse_is_told_also_without_a_sample():
    state, first = driven()
    state, _, status = sense(state, inputs=path_inputs(2, mag_valid=0, switch_off_us=first["switch_off_us"]))
    assert raised(status, MRD_S_SAMPLE_MISSING, MRD_S_SWITCH_OFF_UNSTAMPED) and state["pending"] == (1, 1, 1)
    state, _, status = sense(state, inputs=path_inputs(3, mag_valid=0))
    assert raised(status, MRD_S_SAMPLE_MISSING) and state["pending"] == (0, 0, 0)


# ---- stage 4: what a switch-off is known to be ----

@pytest.mark.parametrize(("changes", "latched"), [
    ({}, 1),
    ({"mag_raw": (32767, 0, 0)}, 1),  # the time of the sample is right, its counts are not
    ({"sample_us": 1_140_501}, 0),
    ({"mag_valid": 0, "sample_us": 0}, 0),
])
def test_only_a_sample_in_time_shows_that_a_switch_off_is_old(changes, latched):
    stamps = (1_000_000,) * 3
    state, trace, _ = sense(inputs=path_inputs(1, switch_off_us=stamps, **changes))
    assert min(trace["gate"]["age_us"]) >= 100_000 and state["off_clear"] == (latched,) * 3
    half_wrap_later = path_inputs(21_500, switch_off_us=stamps)
    _, trace, status = sense(state, inputs=half_wrap_later)
    assert trace["gate"]["trusted"] == latched and status >> MRD_S_BLANKED & 1 == (not latched)


@pytest.mark.parametrize("changes", [{"sample_us": 1_000_000 + 2_000 + 39_999}, {"mag_valid": 0}])
def test_a_switch_off_once_shown_to_be_old_stays_so_until_it_changes(changes):
    state, first = driven((0, 0, 0))
    again = path_inputs(2, **{"switch_off_us": first["switch_off_us"], **changes})
    kept, _, _ = sense(state, inputs=again)
    assert kept["off_clear"] == (1, 1, 1)
    fresh, _, _ = sense(state, inputs={**again, "switch_off_us": (1_001_000,) * 3})
    assert fresh["off_clear"] == (0, 0, 0)


@pytest.mark.parametrize(("age", "shown"), [
    (2**31 - 1, 2**31 - 1), (2**31, 2**31 - 1), (2**32 - 1, 2**31 - 1), (0, 0), (39_999, 39_999),
    (43_000, 43_000),
])
def test_the_age_of_a_latched_coil_wraps(age, shown):
    """Once old, half the wrap or more is that of a switch-off long ago; after the wrap it counts from 0."""
    inputs = path_inputs()
    stamps = ((inputs["sample_us"] - 2_000 - age) % 2**32,) * 3
    state = path_state(switch_off_us=stamps, off_clear=(1, 1, 1))
    state, trace, _ = sense(state, inputs={**inputs, "switch_off_us": stamps})
    assert trace["gate"] == {"age_us": (shown,) * 3, "trusted": int(shown >= 43_000)}
    assert state["off_clear"] == (1, 1, 1)


def test_without_known_stamps_no_sample_is_trusted():
    """After a reset the coils may have been driven in the cycle before: one cycle is let pass."""
    after, trace, status = sense(path_reset())
    assert trace["gate"]["trusted"] == 0 and after["off_known"] == 1 and after["off_clear"] == (0, 0, 0)
    assert raised(status, MRD_S_BLANKED)
    again = path_inputs(2, switch_off_us=path_inputs()["switch_off_us"])
    assert sense(after, inputs=again)[1]["gate"]["trusted"] == 1


def test_without_a_sample_ages_count_to_the_start_of_the_cycle():
    state, trace, status = sense(inputs=path_inputs(mag_valid=0, sample_us=77))
    assert trace["gate"]["age_us"] == (10_000,) * 3 and state["off_clear"] == (0, 0, 0)
    assert raised(status, MRD_S_SAMPLE_MISSING)


# ---- stage 6 ----

@pytest.mark.parametrize(("period", "interval", "factor"), [
    (100_000, 100_000, 16384),
    (100_000, 120_000, 13653),  # (25000·2^14 + 15000) // 30000
    (100_000, 50_000, 32768),
    (100_000, 150_000, 10923),
    (16384, 16384, 16384),
    (32769, 16385, 32768),  # (16384·2^14 + 4096) // 8192
    (65539, 32770, 32768),  # 16384 and 8192
    (65541, 32771, 32768),  # P = 16385, I = 8192: (16385·2^14 + 4096) // 8192 = 32770, limited
    (65535, 98302, 10923),  # I = 49151: the longest interval there is
])
def test_factor_by_hand(period, interval, factor):
    assert factor_of(period, interval) == factor


def test_factor_over_all_periods_at_both_ends_of_the_interval():
    """The ranges hold for every leading part of a period, with the bits below it all 0 or all 1."""
    for k in (0, 1, 9):
        for leading in range(2**14, 2**15):
            for period in {leading << k, (leading + 1 << k) - 1}:
                assert 32765 <= factor_of(period, (period + 1) // 2) <= 32768
                assert 10922 <= factor_of(period, period + period // 2) <= 10925


def flown(interval, mag_raw, previous=FIELD, period=100_000):
    """A second sample after an interval."""
    config = path_config(period_us=period, tolerance_us=0)
    state, _, _ = sense(config=config, inputs=path_inputs(mag_raw=previous))
    start = path_inputs()["cycle_start_us"] + interval
    return sense(state, config, path_inputs(
        cycle_start_us=start, sample_us=start + 40_000, switch_off_us=(start - 10_000,) * 3, mag_raw=mag_raw))


@pytest.mark.parametrize(("period", "interval", "bit"), [
    (100_000, 49_999, MRD_S_INTERVAL_SHORT), (100_000, 50_000, None), (100_000, 150_000, None),
    (100_000, 150_001, MRD_S_INTERVAL_LONG), (100_001, 50_000, MRD_S_INTERVAL_SHORT), (100_001, 50_001, None),
    (100_001, 150_001, None), (100_001, 150_002, MRD_S_INTERVAL_LONG),
])
def test_interval_limits(period, interval, bit):
    state, trace, status = flown(interval, FIELD, period=period)
    assert trace["derivative"]["interval_us"] == interval
    assert trace["derivative"]["valid"] == (bit is None) == state["filter_valid"]
    assert raised(status) if bit is None else raised(status, bit)
    assert state["field_valid"] == 1 and state["sample_us"] == 1_140_000 + interval


def test_derivative_by_hand():
    x, y, z = FIELD
    _, trace, _ = flown(120_000, (x + 300, y - 300, z + 1))
    assert trace["derivative"] == {"interval_us": 120_000, "factor": 13653, "derivative": (250, -250, 1),
        "valid": 1}
    _, trace, _ = flown(100_000, (x + 300, y - 300, z))
    assert trace["derivative"]["derivative"] == (300, -300, 0)


@pytest.mark.parametrize(("change", "derivative", "clamped"),
    [(32767, 32767, 0), (32768, 32767, 1), (40_000, 32767, 1)])
@pytest.mark.parametrize("sign", [1, -1])
def test_derivative_saturates_and_says_so(change, derivative, clamped, sign):
    _, trace, status = flown(100_000, (sign * (change - 16_000), 0, 0), (-16_000 * sign, 0, 0))
    assert trace["derivative"]["derivative"] == (sign * derivative, 0, 0)
    assert status == clamped << MRD_S_DERIVATIVE_CLAMPED


def test_interval_is_taken_across_the_wrap_of_the_stamp():
    early, late = 2**32 - 30_000, 70_000
    state, _, _ = sense(inputs=path_inputs(
        cycle_start_us=early - 40_000, sample_us=early, switch_off_us=(early - 60_000,) * 3))
    _, trace, _ = sense(state, inputs=path_inputs(
        cycle_start_us=30_000, sample_us=late, switch_off_us=(20_000,) * 3, mag_raw=(10_100, -5_000, 2_000)))
    assert trace["derivative"] == {"interval_us": 100_000, "factor": 16384, "derivative": (100, 0, 0),
        "valid": 1}


def test_a_rejected_sample_breaks_the_chain():
    state, _, _ = sense()
    state, trace, _ = sense(state, inputs=path_inputs(2))
    assert trace["derivative"]["valid"] == 1
    kept = state["field"], state["sample_us"]
    state, trace, _ = sense(state, inputs=path_inputs(3, mag_valid=0))
    assert (state["field_valid"], state["filter_valid"], trace["derivative"]["valid"]) == (0, 0, 0)
    assert (state["field"], state["sample_us"]) == kept
    state, trace, status = sense(state, inputs=path_inputs(4))
    assert raised(status, MRD_S_NO_PREVIOUS) and trace["derivative"]["interval_us"] == 0


# ---- stage 7 ----

def test_low_pass_by_hand():
    config = path_config(filter_gain=16384)
    state, filters, filtered = path_state(), [], []
    for cycle, x in enumerate((10_000, 10_100, 10_201, 10_101)):  # derivatives 100, 101, -100
        state, trace, _ = sense(state, config, path_inputs(cycle, mag_raw=(x, -5_000, 2_000)))
        filters.append(trace["low_pass"]["filter"][0])
        filtered.append(trace["low_pass"]["filtered"][0])
    assert filters == [0, 25600, 25728, 64]
    assert filtered == [0, 100, 101, 0]  # 100.5 rounds away from zero, 0.25 to zero


def test_low_pass_rounds_half_away_and_reaches_its_target_at_full_gain():
    assert follow((0, 0, 100), (16384, -16384, 16483), 1) == (1, -1, 100)
    assert follow((-8388352, 8388352, 0), (8388352, -8388352, 5), 32768) == (8388352, -8388352, 5)


def test_the_filter_starts_anew_without_a_derivative():
    config = path_config(filter_gain=128)
    state, _, _ = sense(None, config, path_inputs(0))
    state, _, _ = sense(state, config, path_inputs(1, mag_raw=(10_100, -5_000, 2_000)))
    assert state["filter_valid"] == 1
    late = path_inputs(3)
    state, trace, status = sense(state, config, late)
    assert raised(status, MRD_S_INTERVAL_LONG) and state["filter_valid"] == 0
    assert state["filter"] == (25600, 0, 0)
    assert trace["low_pass"] == {"filter": (0, 0, 0), "filtered": (0, 0, 0)}
    _, trace, _ = sense(state, config, path_inputs(4, mag_raw=(10_200, -5_000, 2_000)))
    assert trace["low_pass"] == {"filter": (51200, 0, 0), "filtered": (200, 0, 0)}
