"""Stages 9 to 12 on numbers worked out by hand, on both sides of comparisons, and against exact fractions."""

from fractions import Fraction
from math import isqrt

import pytest
from exact.samples import SUPERVISOR, path_config, path_inputs
from hypothesis import given
from hypothesis import strategies as st

from pyharness.exact import path_commit, path_drive, path_reset
from pyharness.exact.constants import (
    MRD_GAIN_CONSTANT,
    MRD_GAIN_NORMALISED,
    MRD_LAW_DERIVATIVE,
    MRD_LAW_NONE,
    MRD_LAW_RATE,
    MRD_S_ESTIMATE_FELL_BACK,
    MRD_S_FELL_BACK,
    MRD_S_SATURATED_X,
    MRD_S_SATURATED_Y,
    MRD_S_SATURATED_Z,
    MRD_S_SHORT_PULSE_X,
    MRD_S_SHORT_PULSE_Y,
    MRD_S_SHORT_PULSE_Z,
    MRD_SATURATE_KEEP_DIRECTION,
    MRD_SATURATE_PER_AXIS,
    MRD_SETTLE_BY_FIELD,
    MRD_SETTLE_BY_GYRO,
)
from pyharness.exact.estimate import estimate, rate_across_field, turn_of_field
from pyharness.exact.law import cross_product, gain_used, rate_law
from pyharness.exact.path import zero_trace
from pyharness.exact.pulses import make_pulses
from pyharness.exact.saturation import saturate

UNIT = ((32768,) * 3, (15,) * 3)
COUNT16 = st.integers(-32767, 32767)
VECTOR16 = st.tuples(COUNT16, COUNT16, COUNT16)


def sensed(trusted=1, valid=1, filtered=(0, 0, 0), field=(1000, 0, 0), rate=(0, 0, 0), rate_valid=1):
    """A trace as stages 1 to 8 leave it."""
    trace = zero_trace()
    trace["calibration"] = {"field": field, "rate": rate, "rate_valid": rate_valid}
    norm_sq = sum(x * x for x in field)
    trace["plausibility"] = {"norm_sq": norm_sq, "norm": isqrt(norm_sq)}
    trace["gate"]["trusted"] = trusted
    trace["derivative"]["valid"] = valid
    trace["low_pass"]["filtered"] = filtered
    return trace


# ---- stage 9 ----

@pytest.mark.parametrize(("law", "trusted", "rate_valid", "valid", "active", "fell_back"), [
    (MRD_LAW_DERIVATIVE, 0, 1, 1, MRD_LAW_NONE, 0),
    (MRD_LAW_DERIVATIVE, 1, 0, 1, MRD_LAW_DERIVATIVE, 0),
    (MRD_LAW_DERIVATIVE, 1, 1, 0, MRD_LAW_NONE, 0),
    (MRD_LAW_RATE, 0, 0, 0, MRD_LAW_NONE, 0),
    (MRD_LAW_RATE, 1, 1, 0, MRD_LAW_RATE, 0),
    (MRD_LAW_RATE, 1, 0, 1, MRD_LAW_DERIVATIVE, 1),
    (MRD_LAW_RATE, 1, 0, 0, MRD_LAW_NONE, 1),
])
def test_which_law_acts(law, trusted, rate_valid, valid, active, fell_back):
    trace, status = path_drive(path_config(law=law), sensed(trusted, valid, rate_valid=rate_valid))
    assert trace["law"]["active"] == active
    assert status == fell_back << MRD_S_FELL_BACK


def test_with_no_law_nothing_is_left_in_the_trace():
    before = sensed(trusted=0, filtered=(9, 9, 9))
    stale, _ = path_drive(path_config(), sensed(filtered=(9, 9, 9)))
    trace, _ = path_drive(path_config(), {**stale, **{part: before[part] for part in ("gate", "low_pass")}})
    assert (trace["law"], trace["saturation"], trace["pulses"]) == tuple(
        zero_trace()[part] for part in ("law", "saturation", "pulses"))


@pytest.mark.parametrize(("gain", "filtered", "demand"), [
    (UNIT, (3, -7, 0), (-3, 7, 0)),
    (((32768,) * 3, (16,) * 3), (1, -1, 3), (-1, 1, -2)),  # halves, away from zero
    # 4000000 / 65536 = 61.04
    (((65535, 32768, 40000), (1, 31, 16)), (32767, 32767, -100), (-1073692673, 0, 61)),
    (((32768,) * 3, (30, 29, 31)), (32767,) * 3, (-1, -2, 0)),  # 0.99997, 1.99994 and 0.49998
])
def test_derivative_law_by_hand(gain, filtered, demand):
    config = path_config(derivative_gain=dict(zip(("mantissa", "shift"), gain)))
    trace, _ = path_drive(config, sensed(filtered=filtered))
    assert trace["law"] == {
        "active": MRD_LAW_DERIVATIVE, "cross": (0, 0, 0), "mantissa": gain[0], "shift": gain[1],
        "demand": demand,
    }


def test_rate_law_by_hand():
    trace, _ = path_drive(path_config(law=MRD_LAW_RATE), sensed(rate=(256, 0, 0), field=(0, 128, -384)))
    # cross (0, 256·384, 256·128) = (0, 98304, 32768): 1.5 and 0.5 round away from zero
    assert trace["law"]["cross"] == (0, 98304, 32768)
    assert trace["law"]["demand"] == (0, 2, 1)
    # (2^31 - 2^17 + 2)(2^16 - 1) / 2^17 = 2^30 - 2^16 - 2^14 + 2 - 2^-16
    extreme = ((65535,) * 3, (1,) * 3)
    assert rate_law((2147352578, -2147352578, 1), extreme) == (1073659906, -1073659906, 0)


def test_signs_of_the_rate_law():
    """ω = (.1, −.2, .3) rad/s and B = (20, −30, 10) µT give m along (7, 5, 1) and a power τ·ω below 0.

    A closed form: τ = m × B, τ·ω = −k ‖ω × B‖².
    """
    w, b = (1, -2, 3), (2, -3, 1)
    m = cross_product(w, b)
    assert m == (7, 5, 1)
    torque = cross_product(m, b)
    assert torque == (8, -5, -31)
    assert sum(t * rate for t, rate in zip(torque, w)) == -sum(x * x for x in m) == -75


@pytest.mark.parametrize(("norm_sq", "mantissa", "used"), [
    (32768, 32768, (65535, 16)),  # reciprocal 65535; product below 2^31
    (32768, 65535, (65534, 15)),  # 65535² >> 16
    (0, 65535, (65534, 15)),  # limited to the least plausible norm
    (3221028867, 32768, (43693, 32)),  # 49149, 2^31 // 49149 = 43693, e = 16
    (65535, 65535, (65535, 16)),  # reciprocal 32768: 65535·2^15 is below 2^31
    (65536, 65535, (65534, 16)),  # e = 1
])
def test_normalised_gain_by_hand(norm_sq, mantissa, used):
    config = path_config(gain_scaling=MRD_GAIN_NORMALISED)
    gain = {"mantissa": (mantissa,) * 3, "shift": (-1, -2, -3)}
    m, h = used
    assert gain_used(config, gain, norm_sq) == ((m, m, m), (h - 1, h - 2, h - 3))


def test_each_axis_is_normalised_by_itself():
    config = path_config(gain_scaling=MRD_GAIN_NORMALISED)
    gain = {"mantissa": (32768, 40000, 65535), "shift": (-3, -2, -1)}
    # norm 65536: e = 1, reciprocal 65535; 40000·65535 = 2621400000 is above 2^31 and >> 16 gives 39999
    assert gain_used(config, gain, 65536) == ((65535, 39999, 65534), (14, 14, 15))


@given(st.integers(32768, 3221028867), st.integers(32768, 65535))
def test_normalised_gain_against_fractions(norm_sq, mantissa):
    """Relative error in (−2^-14, 2^-15): two roundings down below 2^-15 each, a norm cut to 16 bits."""
    config = path_config(gain_scaling=MRD_GAIN_NORMALISED)
    shift = 31 - norm_sq.bit_length()
    (m, *_), (h, *_) = gain_used(config, {"mantissa": (mantissa,) * 3, "shift": (shift,) * 3}, norm_sq)
    assert 32768 <= m <= 65535 and 1 <= h <= 31
    ideal = Fraction(mantissa, norm_sq) / Fraction(2) ** shift
    assert -Fraction(1, 2**14) < Fraction(m, 2**h) / ideal - 1 < Fraction(1, 2**15)


def test_normalised_gain_falls_as_the_norm_grows():
    config = path_config(gain_scaling=MRD_GAIN_NORMALISED)
    gain = {"mantissa": (50_000,) * 3, "shift": (-1,) * 3}
    values = []
    for norm_sq in range(32768, 3221028867, 3_000_017):
        (m, *_), (h, *_) = gain_used(config, gain, norm_sq)
        values.append(Fraction(m, 2**h))
    assert all(later <= earlier for earlier, later in zip(values, values[1:]))


# ---- stage 10 ----

def saturated(demand, policy):
    trace, status = saturate(path_config(saturation=policy), demand)
    return trace["command"], status


@pytest.mark.parametrize("policy", [MRD_SATURATE_PER_AXIS, MRD_SATURATE_KEEP_DIRECTION])
@pytest.mark.parametrize(("demand", "bits"), [
    ((32767, -32767, 0), ()), ((32768, 0, 0), (MRD_S_SATURATED_X,)), ((0, -32768, 0), (MRD_S_SATURATED_Y,)),
    ((32768, -32767, 32767), (MRD_S_SATURATED_X,)), ((32767, 32768, -32767), (MRD_S_SATURATED_Y,)),
    ((-32767, 32767, 32768), (MRD_S_SATURATED_Z,)),
    ((0, 0, 2**30), (MRD_S_SATURATED_Z,)), ((-32768, 5, 40000), (MRD_S_SATURATED_X, MRD_S_SATURATED_Z)),
])
def test_saturation_says_which_axes(policy, demand, bits):
    command, status = saturated(demand, policy)
    assert status == sum(1 << bit for bit in bits)
    if not bits:
        assert command == demand


def test_saturation_per_axis():
    assert saturated((40_000, -32_768, 100), MRD_SATURATE_PER_AXIS)[0] == (32767, -32767, 100)


@pytest.mark.parametrize(("demand", "command"), [
    ((65534, -32767, 1), (32767, -16384, 1)),  # reciprocal 32768: 16384.0 and 1.0
    ((32768, 100, -1), (32767, 100, -1)),  # reciprocal 65534
    ((2**30, -(2**29), 2**14), (32767, -16384, 0)),  # exponent 15
])
def test_keep_direction_by_hand(demand, command):
    assert saturated(demand, MRD_SATURATE_KEEP_DIRECTION)[0] == command


@given(st.tuples(*[st.integers(0, 30).flatmap(lambda k: st.integers(-(2**k), 2**k))] * 3))
def test_keep_direction_against_fractions(demand):
    """The largest is exactly at the limit, no sign changes, and every axis is within 2 of the exact ratio.

    Up: divisor cut below 1, reciprocal and product rounded by ½ each. Down: demand cut below 1 and the same
    halves.
    """
    command, _ = saturated(demand, MRD_SATURATE_KEEP_DIRECTION)
    greatest = max(map(abs, demand))
    if greatest <= 32767:
        assert command == demand
        return
    for x, c in zip(demand, command):
        assert x * c > 0 or c == 0
        assert abs(c - Fraction(x * 32767, greatest)) < 2
        if abs(x) == greatest:
            assert abs(c) == 32767


def test_keep_direction_meets_the_limit_for_every_divisor():
    config = path_config(saturation=MRD_SATURATE_KEEP_DIRECTION)
    for divisor in range(32768, 65536):
        assert saturate(config, (-divisor, divisor, 0))[0]["command"] == (-32767, 32767, 0)


# ---- stage 11 ----

@pytest.mark.parametrize(("command", "shortest", "ticks", "short"), [
    ((32767, -32767, 32767), 2, (5000, -5000, -5000), ()),
    ((16384, 0, -16384), 2, (2500, 0, 2500), ()),
    ((3, -3, 3), 2, (0, 0, 0), ()),  # 0.46 ticks: nothing to drop
    ((4, 10, -10), 2, (0, 2, 2), (MRD_S_SHORT_PULSE_X,)),  # 0.61 and 1.53 ticks
    ((4, -4, 4), 2, (0, 0, 0), (MRD_S_SHORT_PULSE_X, MRD_S_SHORT_PULSE_Y, MRD_S_SHORT_PULSE_Z)),
    ((4, -4, 4), 1, (1, -1, -1), ()),  # 1 drops none
])
def test_pulses_by_hand(command, shortest, ticks, short):
    trace, status = make_pulses(path_config(shortest_ticks=shortest), command)
    assert trace["ticks"] == ticks  # the sample's z coil has polarity -1
    assert status == sum(1 << bit for bit in short)


@given(st.integers(1, 16384), VECTOR16)
def test_pulses_stay_in_the_window(window, command):
    config = path_config(window_ticks=window, shortest_ticks=1, polarity=(1, 1, 1))
    for c, n in zip(command, make_pulses(config, command)[0]["ticks"]):
        assert abs(n) <= window
        assert abs(n - Fraction(c * window, 32768)) <= Fraction(1, 2)


def test_the_limit_fills_every_window():
    for window in range(1, 16385):
        config = path_config(window_ticks=window, shortest_ticks=1)
        assert make_pulses(config, (32767, 0, -32767))[0]["ticks"] == (window, 0, window)


@pytest.mark.parametrize(
    ("cycle_start", "opens"), [(1_000_000, 1_045_000), (2**32 - 45_000, 0), (2**32 - 1, 44_999)])
def test_commit_waits_for_the_switch_off_of_every_pulse_made(cycle_start, opens):
    before = {**path_reset(), "drive_us": (5, 6, 7), "pending": (0, 1, 0)}
    after = path_commit(before, path_config(), path_inputs(cycle_start_us=cycle_start), (1, 0, -32768))
    earliest = (opens - path_config()["tolerance_us"]) % 2**32
    assert after == {**before, "drive_us": (earliest, 6, earliest), "pending": (1, 1, 1), "ticks": (1, 0, -32768)}
    assert path_commit(after, path_config(), path_inputs(cycle_start_us=77), (0, 0, 0)) == {
        **after, "ticks": (0, 0, 0)}


# ---- the laws as a whole: odd, and never against the damping ----

def legal_gain(gain, scaling):
    """Shifts of 1:31 brought to -14:-1 where those of the norm, 15:32, are added."""
    if scaling == MRD_GAIN_CONSTANT:
        return gain
    return {**gain, "shift": tuple(-(shift % 14) - 1 for shift in gain["shift"])}


gains = st.fixed_dictionaries({
    "mantissa": st.tuples(*[st.integers(32768, 65535)] * 3), "shift": st.tuples(*[st.integers(1, 31)] * 3)})
drives = st.builds(
    lambda gain, scaling, policy, window, shortest, polarity, law: path_config(
        derivative_gain=legal_gain(gain, scaling),
        rate_gain=legal_gain(gain, scaling),
        gain_scaling=scaling,
        saturation=policy,
        window_ticks=window,
        shortest_ticks=min(shortest, window),
        polarity=polarity,
        law=law,
    ),
    gains, st.integers(1, 2), st.integers(1, 2), st.integers(1, 16384), st.integers(1, 16),
    st.tuples(*[st.sampled_from((1, -1))] * 3), st.integers(1, 2),
)


def negative(v):
    return tuple(-x for x in v)


def driven(config, trace):
    """Command and ticks."""
    trace, _ = path_drive(config, trace)
    return trace["saturation"]["command"], trace["pulses"]["ticks"]


@given(drives, VECTOR16, VECTOR16, VECTOR16)
def test_the_laws_are_odd(config, filtered, rate, field):
    command, ticks = driven(config, sensed(filtered=filtered, rate=rate, field=field))
    opposite = negative(command), negative(ticks)
    if config["law"] == MRD_LAW_RATE:
        assert driven(config, sensed(filtered=filtered, rate=negative(rate), field=field)) == opposite
        assert driven(config, sensed(filtered=filtered, rate=rate, field=negative(field))) == opposite
    else:
        reversed_field = sensed(filtered=negative(filtered), rate=rate, field=negative(field))
        assert driven(config, reversed_field) == opposite


@given(drives, VECTOR16, VECTOR16, VECTOR16)
def test_every_axis_is_zero_or_has_the_damping_sign(config, filtered, rate, field):
    trace, _ = path_drive(config, sensed(filtered=filtered, rate=rate, field=field))
    wanted = trace["law"]["cross"] if config["law"] == MRD_LAW_RATE else negative(filtered)
    for want, command, ticks, polarity in zip(
            wanted, trace["saturation"]["command"], trace["pulses"]["ticks"], config["polarity"]):
        assert command == 0 or command * want > 0
        assert ticks == 0 or ticks * polarity * want > 0


# ---- stage 12 ----

@pytest.mark.parametrize(("filtered", "norm", "mantissa", "shift", "rate"), [
    ((3, 4, 0), 10_000, 32768, 15, 16),  # 5·32768 // 10000
    ((3, 4, 0), 10_000, 65535, 16, 15),
    ((19_999, 0, 0), 10_000, 32768, 15, 65532),  # 19999·32768 // 10000 = 65532.7
    ((20_000, 0, 0), 10_000, 32768, 15, 65535),  # a = 2 b
    ((20_000, 0, 0), 10_000, 65535, 1, 65535),  # saturates
    ((1, 0, 0), 0, 32768, 15, 32768),  # b = 1 at least
    ((2, 0, 0), 0, 32768, 15, 65535),
    ((0, 0, 0), 0, 65535, 1, 0),
    ((32767,) * 3, 56754, 32768, 15, 32768),
])
def test_rate_across_the_field(filtered, norm, mantissa, shift, rate):
    supervisor = {**SUPERVISOR, "estimate_mantissa": mantissa, "estimate_shift": shift}
    assert rate_across_field(supervisor, turn_of_field(filtered, norm)) == rate


@pytest.mark.parametrize(("settle_by", "rate_valid", "valid", "expected"), [
    (MRD_SETTLE_BY_GYRO, 1, 1, (13, 1, 0)),
    (MRD_SETTLE_BY_GYRO, 1, 0, (13, 1, 0)),
    (MRD_SETTLE_BY_GYRO, 0, 1, (163, 1, 1 << MRD_S_ESTIMATE_FELL_BACK)),
    (MRD_SETTLE_BY_GYRO, 0, 0, (0, 0, 1 << MRD_S_ESTIMATE_FELL_BACK)),
    (MRD_SETTLE_BY_FIELD, 1, 1, (163, 1, 0)),
    (MRD_SETTLE_BY_FIELD, 1, 0, (0, 0, 0)),
])
def test_source_of_the_estimate(settle_by, rate_valid, valid, expected):
    """The rate across the field, 5·32768 // 1000 = 163, is there whatever the rate is taken from."""
    trace = sensed(valid=valid, filtered=(3, 4, 0), rate=(3, 4, -12), rate_valid=rate_valid)
    across = {"turn": 163 * valid, "across": 163 * valid, "across_valid": valid}
    assert estimate({**SUPERVISOR, "settle_by": settle_by}, trace) == (across, *expected)
