"""Promise 2: C and exact model stay within a derived bound of the truth."""

from __future__ import annotations

import math
from random import Random

import numpy as np
import pytest
from strategies import Seeded, any_inputs

from pyharness.compare import compare_with_truth
from pyharness.controllers import load_controller
from pyharness.events import Command
from pyharness.exact import constants as mrd
from pyharness.flight.records import to_record
from pyharness.loop import Flight, fly
from pyharness.mission import demo_path, load_mission
from pyharness.scaling import scale
from pyharness.truth import LIMIT, derivative_law, rate_law, saturate_keep_direction, saturate_per_axis
from pyharness.vectors.unit import quiet_cycles

VARIANTS = {
    "derivative": {},
    "low-pass": {"control": {"low_pass_s": 1.5}},
    "per-axis": {"control": {"saturation": "per-axis"}},
    "normalised": {"control": {"gain_scaling": "normalised"}},
    "rate": {"control": {"law": "rate"}},
    "rate, normalised, per axis": {"control": {"law": "rate", "gain_scaling": "normalised", "saturation": "per-axis"}},
    "weak": {"control": {"K_n_m_s": 2e-6}},
    "strong": {"control": {"K_n_m_s": 5e-3, "low_pass_s": 0.7}},
}


def test_signs_of_the_laws():
    """ω, B, k → m, torque, power, worked out in closed form."""
    rate, field, k = np.array([[0.1], [-0.2], [0.3]]), np.array([[20e-6], [-30e-6], [10e-6]]), 1e4
    dipole = rate_law(k, rate, field)
    np.testing.assert_allclose(dipole[:, 0], (0.07, 0.05, 0.01), rtol=1e-12)
    torque = np.cross(dipole, field, axis=0)
    np.testing.assert_allclose(torque[:, 0], (0.8e-6, -0.5e-6, -3.1e-6), rtol=1e-12)
    assert float(np.sum(torque * rate)) == pytest.approx(-7.5e-7)
    # A field fixed in space changes by −ω × B in the body: both laws then ask for the same dipole.
    np.testing.assert_allclose(derivative_law(k, -np.cross(rate, field, axis=0)), dipole, rtol=1e-12)


def test_saturation_of_the_truth():
    share = np.array([[2.0], [-1.0], [0.5]])
    np.testing.assert_allclose(saturate_keep_direction(share), share / 2 * LIMIT)
    np.testing.assert_allclose(saturate_per_axis(share)[:, 0], (LIMIT, -LIMIT, 0.5))
    inside = np.array([[0.2], [-0.9], [0.5]])
    np.testing.assert_array_equal(saturate_keep_direction(inside), inside)


@pytest.mark.parametrize("variant", VARIANTS)
def test_drawn_inputs_stay_within_the_bound(variant):
    """Any inputs, mission by mission; the bound is used to a fair part, so it is not merely loose."""
    scaling = scale(load_mission(demo_path(), VARIANTS[variant]))
    controller = load_controller("c")
    controller.configure([scaling])
    used, acted = 0.0, 0
    for seed in range(12):
        controller.reset()
        sequence = any_inputs(Seeded(seed), scaling.config, 150)
        inputs = np.zeros(len(sequence), controller.interface.inputs)
        for i, values in enumerate(sequence):
            inputs[i] = to_record(controller.interface.inputs, values)
        result = compare_with_truth(scaling, inputs, controller.run(inputs))
        assert result.within, f"seed {seed}: {result.used:.3f}, {result.used_ticks:.3f} of the bound"
        used, acted = max(used, result.used), acted + int(result.active.sum())
    assert acted > 500
    assert used > 0.3


@pytest.mark.parametrize("field", ["command", "ticks"])
def test_a_wrong_command_leaves_the_bound(demo_scaling, field):
    """The comparison can fail: a command off by more than the bound is seen."""
    controller = load_controller("c")
    (record,) = fly([Flight(demo_scaling, 150, separation_s=100)], controller)
    before = compare_with_truth(demo_scaling, record.inputs, record.outputs)
    assert before.within
    stage = record.outputs["trace"]["saturation" if field == "command" else "pulses"][field]
    bound = before.command_bound if field == "command" else before.ticks_bound
    stage[100, 1] += math.ceil(2 * bound[100, 1]) + 1
    assert not compare_with_truth(demo_scaling, record.inputs, record.outputs).within


def test_a_flipped_sign_leaves_the_bound(demo_scaling):
    controller = load_controller("c")
    (record,) = fly([Flight(demo_scaling, 150, separation_s=100)], controller)
    record.outputs["trace"]["saturation"]["command"] *= -1
    assert not compare_with_truth(demo_scaling, record.inputs, record.outputs).within


def test_the_truth_flies_like_the_controller():
    """As a controller in the loop the truth ends where the C ends: its pulses differ by rounding only."""
    scaling = scale(load_mission(demo_path(), {"control": {"saturation": "per-axis"}}))
    flight = Flight(scaling, 300, seed=4, rate_deg_s=(2.0, -1.0, 1.5), separation_s=100)
    (by_c,), (by_truth,) = fly([flight], load_controller("c")), fly([flight], load_controller("truth"))
    np.testing.assert_allclose(by_truth.rate_rad_s, by_c.rate_rad_s, atol=5e-4)
    assert not np.array_equal(by_truth.outputs["ticks"], by_c.outputs["ticks"])


def test_the_bound_holds_where_the_largest_axis_is_uncertain():
    """A gain so high that one count of the field is as large as the limit: the integers then scale by their own largest axis,
    which may be much smaller than the truth's."""
    overrides = {
        "magnetometer": {"counts_per_ut": 160.0, "misalignment_deg": [20.0, -35.0, 60.0], "bias_ut": [0.0, 0.0, 0.0]},
        "control": {"K_n_m_s": None, "k_am2_s_per_t": 2e7},
    }
    scaling = scale(load_mission(demo_path(), overrides))
    controller = load_controller("c")
    controller.configure([scaling])
    inputs = quiet_cycles(8000, scaling.config["path"], controller.interface.inputs)
    draw = Random(11)
    raw = np.array([2800, -3454, 393])
    for row in range(len(inputs)):
        raw = raw + [draw.randint(-1, 1) for _ in range(3)]
        inputs["path"]["mag_raw"][row] = raw
    result = compare_with_truth(scaling, inputs, controller.run(inputs))
    assert result.active.sum() > 7000
    assert 0.5 < result.used <= 1.0


@pytest.mark.parametrize("law", ["derivative", "rate"])
def test_the_bound_holds_on_the_bench(law):
    """The norm is waived there, and the normalised gain goes with the nearest plausible norm, in the truth as well."""
    overrides = {"control": {"law": law, "gain_scaling": "normalised", "field_min_ut": 48.0, "saturation": "per-axis", "K_n_m_s": 1e-6}}
    scaling = scale(load_mission(demo_path(), overrides))
    events = (Command(3, mrd.MRD_COMMAND_SAFE), Command(5, mrd.MRD_COMMAND_ARM, key=0x5AA5))
    controller = load_controller("c")
    (record,) = fly([Flight(scaling, 200, separation_s=100, events=events)], controller)
    assert record.bit(mrd.MRD_S_FIELD_IMPLAUSIBLE).any() and (record.outputs["mode"] == mrd.MRD_MODE_BENCH).any()
    assert compare_with_truth(scaling, record.inputs, record.outputs).within
