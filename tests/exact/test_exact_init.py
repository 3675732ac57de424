"""The configuration check: every boundary from both sides, and the order of the codes."""

import pytest
from exact.samples import make_config

from pyharness.exact import init, path_check
from pyharness.exact.constants import (
    MRD_E_AGREEMENT,
    MRD_E_BENCH,
    MRD_E_CHOICE,
    MRD_E_CONTINUITY,
    MRD_E_CURRENT,
    MRD_E_DIGEST,
    MRD_E_ESTIMATE,
    MRD_E_FILTER,
    MRD_E_GAIN,
    MRD_E_GYRO,
    MRD_E_MAG,
    MRD_E_NORM,
    MRD_E_PERIOD,
    MRD_E_POLARITY,
    MRD_E_PROGRESS,
    MRD_E_SAMPLE,
    MRD_E_SETTLE,
    MRD_E_TIMELINE,
    MRD_E_WINDOW,
    MRD_GAIN_NORMALISED,
    MRD_LAW_RATE,
    MRD_OK,
    MRD_SETTLE_BY_GYRO,
)


def matrix(*entries):
    """A matrix whose last entries are these."""
    return (2,) * (9 - len(entries)) + entries


def sensor_cases(name, code):
    prefix = f"path.{name}."
    return [
        (code, {prefix + "matrix": matrix(-32767, 32767, 1)}, {prefix + "matrix": matrix(-32767, 32767, 2)}),
        (code, {prefix + "matrix": (32767, -1, 32767) * 3},
            {prefix + "matrix": (32767, -2, 32767) + (0,) * 6}),
        (code, {prefix + "matrix": (0, 0, 0, -32767, 1, 32767, 0, 0, 0)},
            {prefix + "matrix": (0, 0, 0, -32767, -2, 32767, 0, 0, 0)}),
        (code, {prefix + "matrix": (-32767,) + (0,) * 8}, {prefix + "matrix": (-32768,) + (0,) * 8}),
        (code, {prefix + "offset": (0, -32767, 32767)}, {prefix + "offset": (0, -32768, 0)}),
        (code, {prefix + "shift": 1}, {prefix + "shift": 0}),
        (code, {prefix + "shift": 16}, {prefix + "shift": 17}),
        (code, {prefix + "limit": 1}, {prefix + "limit": 0}),
        (code, {prefix + "limit": 32767}, {prefix + "limit": -1}),
    ]


# The sample's window ends at 95000 of 100000 us, so that 43000 us are left for blanking and 5000 for delay,
# ticks or phase.
TIGHT = {"path.blanking_us": (0, 0, 0)}
SHORT = {"path.shortest_ticks": 1, "supervisor.bench_limit_ticks": 1, **TIGHT}
# Norms of 17 bits.
NORMALISED = {"path.gain_scaling": MRD_GAIN_NORMALISED, "path.norm_min_sq": 65536, "path.norm_max_sq": 131071}


def normalised(law, *shift, **norms):
    """Gains normalised over norms of 17 bits unless told otherwise: shifts + 16 ≥ 1 and shifts + 17 ≤ 31."""
    other = "rate_gain" if law == "derivative_gain" else "derivative_gain"
    return {**NORMALISED, **norms, f"path.{law}.shift": shift, f"path.{other}.shift": (0, 0, 0)}


FITTED = {"path.current_fitted": 1}
UNFITTED = {"path.current_ticks": -1, "path.current_min": (0, -5, 0), "path.current_off_max": 0}

CASES = [
    *sensor_cases("mag", MRD_E_MAG),
    *sensor_cases("gyro", MRD_E_GYRO),
    (MRD_E_GYRO, {"path.gyro_fitted": 1}, {"path.gyro_fitted": 2}),
    (MRD_E_GYRO, {"path.gyro_fitted": 0, "path.gyro.shift": 0},
        {"path.gyro_fitted": 1, "path.gyro.shift": 0}),
    (MRD_E_NORM, {"path.norm_min_sq": 32768}, {"path.norm_min_sq": 32767}),
    (MRD_E_NORM, {"path.norm_max_sq": 3221028867}, {"path.norm_max_sq": 3221028868}),
    (MRD_E_NORM, {"path.norm_min_sq": 70000, "path.norm_max_sq": 70000},
        {"path.norm_min_sq": 70001, "path.norm_max_sq": 70000}),
    (MRD_E_PERIOD, {"path.period_us": 10_000_000}, {"path.period_us": 10_000_001}),
    (MRD_E_PERIOD,
     {"path.period_us": 16384, "path.phase_us": 2000, "path.tick_us": 1, "path.window_ticks": 1, **SHORT},
     {"path.period_us": 16383, "path.phase_us": 2000, "path.tick_us": 1, "path.window_ticks": 1, **SHORT}),
    (MRD_E_SAMPLE, {"path.phase_us": 2000, "path.half_sample_us": 2000},
        {"path.phase_us": 1999, "path.half_sample_us": 2000}),
    (MRD_E_SAMPLE, {"path.tolerance_us": 24999}, {"path.tolerance_us": 25000}),
    (MRD_E_SAMPLE, {"path.period_us": 100_003, "path.tolerance_us": 24999},
        {"path.period_us": 100_003, "path.tolerance_us": 25000}),
    (MRD_E_WINDOW, {"path.tick_us": 1}, {"path.tick_us": 0}),
    (MRD_E_WINDOW, {"path.window_ticks": 16384, "path.tick_us": 1},
        {"path.window_ticks": 16385, "path.tick_us": 1}),
    (MRD_E_WINDOW, {"path.window_ticks": 1, "path.shortest_ticks": 1, "supervisor.bench_limit_ticks": 1},
     {"path.window_ticks": 0, "path.shortest_ticks": 1, "supervisor.bench_limit_ticks": 1}),
    (MRD_E_WINDOW, {"path.shortest_ticks": 1}, {"path.shortest_ticks": 0}),
    (MRD_E_WINDOW, {"path.shortest_ticks": 5000}, {"path.shortest_ticks": 5001}),
    (MRD_E_TIMELINE, {"path.delay_us": 2000}, {"path.delay_us": 1999}),
    (MRD_E_TIMELINE, {**TIGHT, "path.delay_us": 10_000}, {**TIGHT, "path.delay_us": 10_001}),
    (MRD_E_TIMELINE, {**TIGHT, "path.window_ticks": 5500}, {**TIGHT, "path.window_ticks": 5501}),
    (MRD_E_TIMELINE, {**TIGHT, "path.phase_us": 45_000}, {**TIGHT, "path.phase_us": 45_001}),
    (MRD_E_TIMELINE, {**TIGHT, "path.period_us": 95_000}, {**TIGHT, "path.period_us": 94_999}),
    (MRD_E_TIMELINE, {"path.delay_us": 5000}, {**TIGHT, "path.delay_us": 2**32 - 1}),
    *[(MRD_E_TIMELINE,
       {"path.blanking_us": tuple(43_000 if i == coil else 0 for i in range(3))},
       {"path.blanking_us": tuple(43_001 if i == coil else 0 for i in range(3))}) for coil in range(3)],
    (MRD_E_FILTER, {"path.filter_gain": 128}, {"path.filter_gain": 127}),
    (MRD_E_FILTER, {"path.filter_gain": 32768}, {"path.filter_gain": 32769}),
    (MRD_E_CHOICE, {"path.law": 1}, {"path.law": 0}),
    (MRD_E_CHOICE, {"path.law": 2}, {"path.law": 3}),
    (MRD_E_CHOICE, {"path.law": MRD_LAW_RATE, "path.gyro_fitted": 1},
        {"path.law": MRD_LAW_RATE, "path.gyro_fitted": 0}),
    (MRD_E_CHOICE, {"path.gain_scaling": 1}, {"path.gain_scaling": 0}),
    (MRD_E_CHOICE, normalised("rate_gain", 0, 0, 0), {"path.gain_scaling": 3}),
    (MRD_E_CHOICE, {"path.saturation": 1}, {"path.saturation": 0}),
    (MRD_E_CHOICE, {"path.saturation": 2}, {"path.saturation": 3}),
    *[(MRD_E_POLARITY, {"path.polarity": (-1, 1, -1)}, {"path.polarity": wrong})
      for wrong in ((0, 1, 1), (1, 2, 1), (1, 1, -2), (1, 1, 0))],
    *[case for law in ("derivative_gain", "rate_gain") for case in [
        (MRD_E_GAIN, {f"path.{law}.mantissa": (32768, 65535, 40000)},
            {f"path.{law}.mantissa": (32767, 65535, 40000)}),
        (MRD_E_GAIN, {f"path.{law}.shift": (1, 31, 2)}, {f"path.{law}.shift": (1, 31, 0)}),
        (MRD_E_GAIN, {f"path.{law}.shift": (1, 31, 2)}, {f"path.{law}.shift": (32, 31, 2)}),
        (MRD_E_GAIN, normalised(law, -15, 14, 0), normalised(law, -16, 14, 0)),
        (MRD_E_GAIN, normalised(law, -15, 14, 0), normalised(law, -15, 15, 0)),
        (MRD_E_GAIN, normalised(law, 0, 14, 0), normalised(law, 0, 14, 0, **{"path.norm_max_sq": 131072})),
        (MRD_E_GAIN, normalised(law, 0, -15, 0), normalised(law, 0, -15, 0, **{"path.norm_min_sq": 65535})),
    ]],
    (MRD_E_CONTINUITY, {"path.jump_max_sq": 1}, {"path.jump_max_sq": 0}),
    (MRD_E_CONTINUITY, {"path.jump_max_sq": 3221028867}, {"path.jump_max_sq": 3221028868}),
    (MRD_E_CONTINUITY, {"path.noise_limit": 1}, {"path.noise_limit": 0}),
    (MRD_E_AGREEMENT, {"path.agree_mantissa": 32768}, {"path.agree_mantissa": 32767}),
    (MRD_E_AGREEMENT, {"path.agree_mantissa": 65535, "path.gyro_fitted": 0},
        {"path.agree_mantissa": 0, "path.gyro_fitted": 0}),
    (MRD_E_AGREEMENT, {"path.agree_shift": 1}, {"path.agree_shift": 0}),
    (MRD_E_AGREEMENT, {"path.agree_shift": 31}, {"path.agree_shift": 32}),
    (MRD_E_AGREEMENT, {"path.agree_rate_max": 1}, {"path.agree_rate_max": 0}),
    (MRD_E_AGREEMENT, {"path.agree_rate_max": 32767}, {"path.agree_rate_max": -32768}),
    (MRD_E_CURRENT, {"path.current_fitted": 1}, {"path.current_fitted": 2}),
    (MRD_E_CURRENT, {"path.current_fitted": 0, **UNFITTED}, {"path.current_fitted": 1, **UNFITTED}),
    (MRD_E_CURRENT, {**FITTED, "path.current_ticks": 1}, {**FITTED, "path.current_ticks": 0}),
    (MRD_E_CURRENT, {**FITTED, "path.current_ticks": 5000}, {**FITTED, "path.current_ticks": 5001}),
    (MRD_E_CURRENT, {**FITTED, "path.current_off_max": 1}, {**FITTED, "path.current_off_max": 0}),
    *[(MRD_E_CURRENT,
       {**FITTED, "path.current_min": tuple(11 if i == coil else 500 for i in range(3))},
       {**FITTED, "path.current_min": tuple(10 if i == coil else 500 for i in range(3))}) for coil in range(3)],
    (MRD_E_SETTLE, {"supervisor.settle_by": 1}, {"supervisor.settle_by": 0}),
    (MRD_E_SETTLE, {"supervisor.settle_by": 2}, {"supervisor.settle_by": 3}),
    (MRD_E_SETTLE, {"supervisor.settle_by": MRD_SETTLE_BY_GYRO},
        {"supervisor.settle_by": MRD_SETTLE_BY_GYRO, "path.gyro_fitted": 0}),
    (MRD_E_SETTLE, {"supervisor.settled_rate": 200}, {"supervisor.settled_rate": 201}),
    (MRD_E_SETTLE, {"supervisor.wake_rate": 65534}, {"supervisor.wake_rate": 65535}),
    (MRD_E_SETTLE, {"supervisor.wake_rate": 65534, "supervisor.settled_rate": 65534},
        {"supervisor.wake_rate": 65534, "supervisor.settled_rate": 65535}),
    (MRD_E_SETTLE, {"supervisor.settle_dwell": 1}, {"supervisor.settle_dwell": 0}),
    (MRD_E_SETTLE, {"supervisor.wake_dwell": 2**32 - 1}, {"supervisor.wake_dwell": 0}),
    (MRD_E_ESTIMATE, {"supervisor.estimate_mantissa": 32768}, {"supervisor.estimate_mantissa": 32767}),
    (MRD_E_ESTIMATE, {"supervisor.estimate_shift": 1}, {"supervisor.estimate_shift": 0}),
    (MRD_E_ESTIMATE, {"supervisor.estimate_shift": 31}, {"supervisor.estimate_shift": 32}),
    (MRD_E_PROGRESS, {"supervisor.growth": 257}, {"supervisor.growth": 256}),
    (MRD_E_PROGRESS, {"supervisor.growth": 1024}, {"supervisor.growth": 1025}),
    (MRD_E_PROGRESS, {"supervisor.progress": 1}, {"supervisor.progress": 0}),
    (MRD_E_PROGRESS, {"supervisor.progress": 256}, {"supervisor.progress": 257}),
    (MRD_E_PROGRESS, {"supervisor.window_cycles": 1}, {"supervisor.window_cycles": 0}),
    (MRD_E_PROGRESS, {"supervisor.pause_cycles": 2**32 - 1}, {"supervisor.pause_cycles": 0}),
    (MRD_E_BENCH, {"supervisor.bench_limit_ticks": 1}, {"supervisor.bench_limit_ticks": 0}),
    (MRD_E_BENCH, {"supervisor.bench_limit_ticks": 5000}, {"supervisor.bench_limit_ticks": 5001}),
    (MRD_E_BENCH, {"supervisor.bench_key": 1}, {"supervisor.bench_key": 0}),
]


@pytest.mark.parametrize(("code", "legal", "illegal"), CASES)
def test_both_sides_of_every_boundary(code, legal, illegal):
    good, bad = make_config(legal), make_config(illegal)
    assert init(good) == MRD_OK == path_check(good["path"])
    assert init(bad) == code
    assert path_check(bad["path"]) == (code if code <= MRD_E_CURRENT else MRD_OK)


def test_every_code_has_a_case():
    assert {code for code, _, _ in CASES} == set(range(MRD_E_MAG, MRD_E_DIGEST))


def test_the_digest_comes_last():
    config = make_config()
    assert init({**config, "digest": config["digest"] ^ 1}) == MRD_E_DIGEST
    assert path_check(config["path"]) == MRD_OK


def test_the_first_failure_in_the_order_of_the_codes_is_returned():
    first = {}
    for code, _, illegal in CASES:
        first.setdefault(code, illegal)
    broken = {}
    for code in sorted(first, reverse=True):
        broken = {**broken, **first[code]}
        assert init(make_config(broken)) == code


def test_a_phase_beyond_the_period_is_a_matter_of_the_sample():
    assert init(make_config({"path.phase_us": 100_000})) == MRD_E_SAMPLE
    assert init(make_config({"path.phase_us": 99_999})) == MRD_E_TIMELINE
