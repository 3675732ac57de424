"""Stages 5 and 8 by hand: counts that stand still, jumps, noise, and a gyro that the field contradicts."""

import pytest
from exact.samples import FIELD, path_config, path_inputs, path_state

from pyharness.exact import path_drive, path_sense
from pyharness.exact.constants import (
    MRD_LAW_DERIVATIVE,
    MRD_LAW_RATE,
    MRD_S_BLANKED,
    MRD_S_FELL_BACK,
    MRD_S_FIELD_IMPLAUSIBLE,
    MRD_S_GYRO_DISAGREES,
    MRD_S_GYRO_FROZEN,
    MRD_S_INTERVAL_LONG,
    MRD_S_MAG_DEAD_AXIS,
    MRD_S_MAG_FROZEN,
    MRD_S_MAG_JUMP,
    MRD_S_MAG_NOISY,
    MRD_S_SAMPLE_OFF_TIME,
)


def run(config, raws, state=None, waive=0, **inputs):
    """State, and trace and status of each cycle, of these field counts in a row; None is a missing sample."""
    state, traces, words = state or path_state(), [], []
    for cycle, raw in enumerate(raws, 1):
        field = {"mag_valid": 0} if raw is None else {"mag_raw": raw}
        state, trace, status = path_sense(state, config, path_inputs(cycle, **field, **inputs), waive)
        traces.append(trace)
        words.append(status)
    return state, traces, words


def with_bit(words, number):
    """In which cycles a status bit is set."""
    return [word >> number & 1 for word in words]


def trusted(traces):
    return [trace["gate"]["trusted"] for trace in traces]


# ---- stage 5: counts ----

def test_frozen_counts_by_hand():
    state, traces, words = run(path_config(frozen_limit=3, dead_limit=3), [FIELD] * 5 + [(10_001, -5_001, 2_001)])
    assert [trace["continuity"]["same"][0] for trace in traces] == [0, 1, 2, 3, 4, 0]
    assert with_bit(words, MRD_S_MAG_FROZEN) == [0, 0, 0, 1, 1, 0]
    assert not any(with_bit(words, MRD_S_MAG_DEAD_AXIS))
    assert trusted(traces) == [1, 1, 1, 0, 0, 1] and state["mag_same"] == (0, 0, 0)


@pytest.mark.parametrize("axis", range(3))
def test_a_dead_axis_by_hand(axis):
    raws = [tuple(x if i == axis else x + k for i, x in enumerate(FIELD)) for k in range(4)]
    _, traces, words = run(path_config(frozen_limit=2, dead_limit=2), raws)
    assert traces[3]["continuity"]["same"] == tuple(3 if i == axis else 0 for i in range(3))
    assert with_bit(words, MRD_S_MAG_DEAD_AXIS) == [0, 0, 1, 1] and not any(with_bit(words, MRD_S_MAG_FROZEN))
    assert trusted(traces) == [1, 1, 0, 0]


def test_limits_of_zero_never_find_counts_that_stand_still():
    _, traces, words = run(path_config(), [FIELD] * 9)
    assert trusted(traces) == [1] * 9 and not any(word >> MRD_S_MAG_FROZEN & 3 for word in words)


def test_a_missing_sample_neither_counts_nor_forgets():
    state, traces, words = run(path_config(frozen_limit=2), [FIELD, FIELD, None, FIELD])
    assert [trace["continuity"]["same"] for trace in traces] == [(0,) * 3, (1,) * 3, (0,) * 3, (2,) * 3]
    assert with_bit(words, MRD_S_MAG_FROZEN) == [0, 0, 0, 1]


def test_counts_out_of_range_count_too_and_the_counter_stops():
    railed = (32767, 0, 0)
    state = path_state(mag_known=1, mag_raw=railed, mag_same=(65534, 65535, 7))
    state, traces, words = run(path_config(frozen_limit=8), [railed], state)
    assert state["mag_same"] == traces[0]["continuity"]["same"] == (65535, 65535, 8)
    assert with_bit(words, MRD_S_MAG_FROZEN) == [1]


# ---- stage 5: jump ----

@pytest.mark.parametrize(("change", "jumps"), [
    ((60, 80, 0), 0), ((60, 80, 1), 1), ((0, 0, -100), 0), ((0, 0, -101), 1),
])
def test_a_jump_beyond_its_limit_costs_two_cycles(change, jumps):
    leapt = tuple(x + d for x, d in zip(FIELD, change))
    state, traces, words = run(path_config(jump_max_sq=10_000), [FIELD, leapt, leapt, leapt])
    assert [trace["continuity"]["jump_sq"] for trace in traces[:2]] == [0, sum(d * d for d in change)]
    assert with_bit(words, MRD_S_MAG_JUMP) == [0, jumps, 0, 0]
    assert trusted(traces) == [1, 1 - jumps, 1, 1]
    assert [trace["derivative"]["valid"] for trace in traces] == [0, 1 - jumps, 1 - jumps, 1]


@pytest.mark.parametrize(("interval", "seen"), [(150_000, 1), (150_001, 0), (2**31, 0), (0, 1)])
def test_a_jump_is_seen_within_one_and_a_half_periods(interval, seen):
    sample = path_inputs()["sample_us"]
    state = path_state(field_valid=1, field=(-5000, 0, 0), sample_us=(sample - interval) % 2**32)
    _, (trace,), words = run(path_config(jump_max_sq=1), [(5000, 0, 0)], state)
    assert trace["continuity"]["jump_sq"] == seen * 10**8 and with_bit(words, MRD_S_MAG_JUMP) == [seen]
    assert with_bit(words, MRD_S_INTERVAL_LONG) == [1 - seen]


def test_each_axis_of_a_jump_is_clamped():
    config = path_config(jump_max_sq=3221028867)
    _, traces, words = run(config, [(-32766,) * 3, (32766,) * 3])
    assert traces[1]["continuity"]["jump_sq"] == 3 * 32767**2 and not any(with_bit(words, MRD_S_MAG_JUMP))


# ---- stage 5: noise ----

def test_noise_trips_at_the_sixteenth_vote_and_clears_after_sixty_four():
    noisy = [(5000 + 6 * (k % 2), 0, 0) for k in range(18)]
    calm = [(5000, 0, k) for k in range(66)]
    state, traces, words = run(path_config(noise_limit=5), noisy + calm)
    assert [trace["continuity"]["norm_change"] for trace in traces[:3]] == [0, 6, 6]
    tripped = with_bit(words, MRD_S_MAG_NOISY)
    assert tripped[:17] == [0] * 16 + [1]  # the first sample has nothing to change from
    # One vote more than needed, then from 5006 to 5000 one more, and 64 for.
    assert tripped[18:] == [1] * 64 + [0] * 2 and trusted(traces)[-2:] == [1, 1]
    assert not any(trusted(traces)[17:-2])


def test_a_change_at_the_limit_is_none():
    state, _, words = run(path_config(noise_limit=6), [(5000 + 6 * (k % 2), 0, 0) for k in range(30)])
    assert state["noise"] == {"level": 0, "tripped": 0} and not any(with_bit(words, MRD_S_MAG_NOISY))


@pytest.mark.parametrize(("changes", "bit"), [
    ({"sample_us": 1_240_501}, MRD_S_SAMPLE_OFF_TIME), ({"switch_off_us": (1_230_000,) * 3}, MRD_S_BLANKED),
    ({"mag_valid": 0}, None), ({"mag_raw": (32767, 0, 0)}, None), ({}, None),
])
def test_a_sample_that_a_coil_or_the_clock_may_have_spoilt_has_no_part_in_the_noise(changes, bit):
    before = path_state(norm=4000, norm_known=1, noise={"level": 8, "tripped": 1})
    inputs = {**path_inputs(2, mag_raw=(5000, 0, 0)), **changes}
    state, trace, status = path_sense(before, path_config(noise_limit=5), inputs, 0)
    assert status >> MRD_S_MAG_NOISY & 1 and (bit is None or status >> bit & 1)
    if changes:
        assert (state["norm"], state["norm_known"], state["noise"]["level"]) == (4000, 0, 8)
        assert trace["continuity"]["norm_change"] == 0
    else:
        assert (state["norm"], state["norm_known"], state["noise"]["level"]) == (5000, 1, 12)
        assert trace["continuity"]["norm_change"] == 1000


# ---- stage 5: gyro, trust ----

def test_frozen_gyro_counts_by_hand():
    state, seen = path_state(), []
    rates = [(1, 2, 3)] * 4 + [None, (1, 2, 3), (1, 2, 4), (0, 2, 4)]
    for cycle, raw in enumerate(rates, 1):
        gyro = {"gyro_valid": 0} if raw is None else {"gyro_raw": raw}
        state, trace, status = path_sense(
            state, path_config(gyro_frozen_limit=3), path_inputs(cycle, **gyro), 0)
        seen.append((trace["continuity"]["gyro_same"], status >> MRD_S_GYRO_FROZEN & 1,
            trace["calibration"]["rate_valid"]))
    assert seen == [(0, 0, 1), (1, 0, 1), (2, 0, 1), (3, 1, 0), (0, 0, 0), (4, 1, 0), (0, 0, 1), (0, 0, 1)]
    assert state["gyro_raw"] == (0, 2, 4)
    kept, trace, status = path_sense(path_state(gyro_same=9), path_config(gyro_fitted=0, gyro_frozen_limit=1),
        path_inputs(), 0)
    assert (kept["gyro_same"], kept["gyro_known"], trace["continuity"]["gyro_same"]) == (9, 0, 0)


@pytest.mark.parametrize(("config", "state", "bit"), [
    ({"norm_max_sq": 32768}, {}, MRD_S_FIELD_IMPLAUSIBLE),
    ({"frozen_limit": 1}, {"mag_known": 1, "mag_raw": FIELD}, MRD_S_MAG_FROZEN),
    ({"dead_limit": 1}, {"mag_known": 1, "mag_raw": (10_000, 0, 0)}, MRD_S_MAG_DEAD_AXIS),
    ({"jump_max_sq": 1}, {"field_valid": 1, "sample_us": 1_040_000}, MRD_S_MAG_JUMP),
    ({}, {"noise": {"level": 30, "tripped": 1}}, MRD_S_MAG_NOISY),
])
def test_what_is_waived_is_reported_but_does_not_reject(config, state, bit):
    for waive in (0, 1, 65535):
        _, (trace,), (status,) = run(path_config(**config), [FIELD], path_state(**state), waive)
        assert status >> bit & 1 and trace["gate"]["trusted"] == (waive != 0)


# ---- stage 8 ----

JUDGING = path_config(agree_limit=10)  # w x B in field counts a period: a quarter
KNOWN = {"field_valid": 1, "field": (0, 1000, 0), "sample_us": 1_040_000, "rate_known": 1, "rate": (4, 0, 0),
    "agreement": {"level": 8, "tripped": 0}}
TURNED = {"mag_raw": (0, 1000, 20), "gyro_raw": (5, 0, 0)}


def compared(config=JUDGING, state=None, **inputs):
    return path_sense(path_state(**{**KNOWN, **(state or {})}), config, path_inputs(1, **{**TURNED, **inputs}), 0)


def test_residual_by_hand():
    """Mean rate 4.5 → 5, mean field (0, 1000, 10): w x B = (0, -50, 5000), a quarter (0, -12.5 → -13, 1250)."""
    after, trace, status = compared()
    assert trace["derivative"]["derivative"] == (0, 0, 20)
    assert trace["agreement"] == {"judged": 1, "residual": (0, -13, 1270)}
    assert after["agreement"] == {"level": 12, "tripped": 0}
    assert (after["rate"], after["rate_known"]) == ((5, 0, 0), 1) and not status >> MRD_S_GYRO_DISAGREES & 1
    # With the turn that this rate makes, mean field (0, 1000, -625): 5·625 / 4 = 781.25 is left on y.
    _, trace, _ = compared(mag_raw=(0, 1000, -1250))
    assert trace["agreement"]["residual"] == (0, 781, 0)


@pytest.mark.parametrize(("limit", "level"), [(17, 12), (18, 7)])
@pytest.mark.parametrize("change", [(0, 0, 20), (0, 0, -20), (20, 0, 0), (0, 20, -3)])
def test_a_residual_counts_beyond_the_limit_and_an_eighth_of_the_derivative(limit, level, change):
    raw = tuple(b + d for b, d in zip((0, 1000, 0), change))
    config = {**JUDGING, "agree_limit": limit}
    after, trace, _ = compared(config, {"rate": (0, 0, 0)}, mag_raw=raw, gyro_raw=(0, 0, 0))
    assert trace["agreement"] == {"judged": 1, "residual": change}  # 20 against limit + (20 >> 3)
    assert after["agreement"]["level"] == level


@pytest.mark.parametrize(("config", "state", "inputs", "judged"), [
    ({}, {}, {}, 1), ({"agree_limit": 0}, {}, {}, 0), ({}, {"rate_known": 0}, {}, 0), ({}, {}, {"gyro_valid": 0}, 0),
    ({}, {}, {"gyro_raw": (32767, 0, 0)}, 0), ({}, {"field_valid": 0}, {}, 0), ({}, {}, {"mag_valid": 0}, 0),
    ({"agree_rate_max": 5}, {}, {}, 1), ({"agree_rate_max": 4}, {}, {}, 0),
    ({"agree_rate_max": 4}, {"rate": (-3, 0, 0)}, {"gyro_raw": (-5, 0, 0)}, 1),
    ({"agree_rate_max": 4}, {"rate": (-4, 0, 0)}, {"gyro_raw": (-5, 0, 0)}, 0),
    ({}, {"field": (-16_000, 0, 0)}, {"mag_raw": (16_767, 0, 0)}, 1),
    ({}, {"field": (-16_000, 0, 0)}, {"mag_raw": (16_768, 0, 0)}, 0),  # clamped
    ({"gyro_frozen_limit": 1}, {"gyro_known": 1, "gyro_raw": (5, 0, 0)}, {}, 0),
    ({"gyro_fitted": 0}, {}, {}, 0),
])
def test_when_gyro_and_field_are_compared(config, state, inputs, judged):
    after, trace, _ = compared({**JUDGING, **config}, state, **inputs)
    assert trace["agreement"]["judged"] == judged
    if not judged:
        assert trace["agreement"]["residual"] == (0, 0, 0) and after["agreement"] == KNOWN["agreement"]


def test_without_a_gyro_the_state_keeps_no_rate():
    after, _, status = compared(path_config(gyro_fitted=0), {"agreement": {"level": 30, "tripped": 1}})
    assert (after["rate"], after["rate_known"]) == ((4, 0, 0), 1) and not status >> MRD_S_GYRO_DISAGREES & 1


@pytest.mark.parametrize(("level", "disagrees"), [(56, 0), (60, 1)])
def test_a_gyro_that_disagrees_is_not_used_but_still_compared(level, disagrees):
    config = path_config(agree_limit=10, law=MRD_LAW_RATE)
    after, trace, status = compared(config, {"agreement": {"level": level, "tripped": 0}})
    assert status >> MRD_S_GYRO_DISAGREES & 1 == disagrees
    assert trace["calibration"]["rate_valid"] == 1 - disagrees and after["rate_known"] == 1
    trace, status = path_drive(config, trace)
    assert trace["law"]["active"] == (MRD_LAW_DERIVATIVE if disagrees else MRD_LAW_RATE)
    assert status >> MRD_S_FELL_BACK & 1 == disagrees


def test_a_gyro_once_in_doubt_is_not_used_where_nothing_is_compared():
    _, trace, status = compared(state={"field_valid": 0, "agreement": {"level": 1, "tripped": 1}})
    assert status >> MRD_S_GYRO_DISAGREES & 1 and trace["calibration"]["rate_valid"] == 0
