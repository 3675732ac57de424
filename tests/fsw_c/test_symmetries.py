"""Promise 4, on the C: the law is odd, damps on every axis, and does not care how the axes are called."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest
from fsw_c.runs import Bank
from strategies import Seeded, any_config, any_inputs

from pyharness import exact

IDENTITY = {"matrix": (16384, 0, 0, 0, 16384, 0, 0, 0, 16384), "offset": (0, 0, 0), "shift": 14, "limit": 32767}
"""Calibration that hands raw counts through, so that a test can choose calibrated values."""

SEEDS = range(60)


def calibrated(seed: int, law: int | None = None) -> tuple[dict, list[dict]]:
    """Any legal configuration with identity calibration, and inputs for it; no commands, no low power."""
    source = Seeded(seed)
    config = any_config(source)
    config["path"] |= {"mag": IDENTITY, "gyro": IDENTITY, "gyro_fitted": 1, "norm_min_sq": 32768, "norm_max_sq": 3221028867}
    if law:
        config["path"]["law"] = law
    # Gains that give commands, below and above saturation; -1 is what the widest range of norms leaves legal.
    shift = tuple(source.integer(2, 14) for _ in range(3)) if config["path"]["gain_scaling"] == 1 else (-1, -1, -1)
    config["path"]["derivative_gain"]["shift"] = config["path"]["rate_gain"]["shift"] = shift
    config["supervisor"] |= {"hold_off_s": 0, "settled_rate": 0, "settle_dwell": 2**32 - 1}
    config["digest"] = exact.config_digest(config)
    assert exact.init(config) == 0
    sequence = any_inputs(source, config, 40)
    size = source.integer(200, 18000)
    field = np.array([source.integer(-size, size) for _ in range(3)])
    for inputs in sequence:
        inputs |= {"command": 0, "low_power": 0}
        step = source.integer(1, 3000)
        field = np.clip(field + [source.integer(-step, step) for _ in range(3)], -18000, 18000)
        inputs["path"]["mag_raw"] = tuple(field.tolist())
        inputs["path"]["gyro_raw"] = tuple(source.integer(-32766, 32766) for _ in range(3))
    return config, sequence


def changed(sequence: list[dict], **paths) -> list[dict]:
    """The sequence with functions applied to fields of the path's inputs."""
    return [{**i, "path": {**i["path"], **{k: f(i["path"][k]) for k, f in paths.items()}}} for i in sequence]


def negated(values):
    return tuple(-v for v in values)


def acted(outputs: np.ndarray, law: int) -> np.ndarray:
    return outputs["trace"]["law"]["active"] == law


@pytest.mark.parametrize("seed", SEEDS)
def test_the_derivative_law_is_odd(library, seed):
    """Odd in field samples and filter state together: a negated run from the start negates every value."""
    config, sequence = calibrated(seed, law=1)
    plain = Bank(library, config).run(sequence)
    mirrored = Bank(library, config).run(changed(sequence, mag_raw=negated))
    assert acted(plain, 1).any()
    for stage, value in (("derivative", "derivative"), ("low_pass", "filter"), ("law", "demand"), ("saturation", "command"),
                         ("pulses", "ticks")):
        np.testing.assert_array_equal(mirrored["trace"][stage][value], -plain["trace"][stage][value])
    np.testing.assert_array_equal(mirrored["ticks"], -plain["ticks"])
    np.testing.assert_array_equal(mirrored["status"], plain["status"])


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("which", ["mag_raw", "gyro_raw"])
def test_the_rate_law_is_odd_in_rate_and_in_field(library, seed, which):
    config, sequence = calibrated(seed, law=2)
    plain = Bank(library, config).run(sequence)
    mirrored = Bank(library, config).run(changed(sequence, **{which: negated}))
    on = acted(plain, 2)
    assert on.any()
    for stage, value in (("law", "cross"), ("law", "demand"), ("saturation", "command"), ("pulses", "ticks")):
        np.testing.assert_array_equal(mirrored["trace"][stage][value][on], -plain["trace"][stage][value][on])


def test_each_axis_damps_or_rests(library):
    """After saturation, rounding and pulses: zero, or the sign of ω × B, respectively of minus the filtered derivative."""
    commands = driven = 0
    for seed in range(200):
        config, sequence = calibrated(seed)
        outputs = Bank(library, config).run(sequence)
        trace = outputs["trace"]
        wanted = np.where(acted(outputs, 2)[:, None], trace["law"]["cross"], -trace["low_pass"]["filtered"].astype(int))
        polarity = np.array(config["path"]["polarity"])
        for value, sense in ((trace["saturation"]["command"], 1), (trace["pulses"]["ticks"], polarity), (outputs["ticks"], polarity)):
            sign = np.sign(value) * sense
            assert ((sign == 0) | (sign == np.sign(wanted))).all(), f"seed {seed}"
        commands += wanted.size
        driven += np.count_nonzero(trace["saturation"]["command"])
    assert driven > commands / 4


@pytest.mark.parametrize("seed", range(20))
@pytest.mark.parametrize("order", list(permutations(range(3))))
def test_axes_may_be_relabelled(library, seed, order):
    """Permuted inputs and per-axis configuration permute every value; an odd permutation negates ω × B."""
    config, sequence = calibrated(seed)
    handed = 1 if order in ((0, 1, 2), (1, 2, 0), (2, 0, 1)) else -1
    permuted = lambda v: tuple(v[i] for i in order)  # noqa: E731
    path = config["path"]
    gains = {
        name: {key: permuted(value) for key, value in path[name].items()} for name in ("derivative_gain", "rate_gain")
    }
    renamed = {**config, "path": {**path, **gains, **{k: permuted(path[k]) for k in ("polarity", "blanking_us")}}}
    renamed["digest"] = exact.config_digest(renamed)
    turned = changed(sequence, mag_raw=permuted, switch_off_us=permuted,
                     gyro_raw=lambda v: tuple(handed * x for x in permuted(v)))  # fmt: skip
    plain, other = Bank(library, config).run(sequence), Bank(library, renamed).run(turned)
    for stage, value in (("derivative", "derivative"), ("law", "demand"), ("saturation", "command"), ("pulses", "ticks"),
                         ("gate", "age_us")):
        np.testing.assert_array_equal(other["trace"][stage][value], plain["trace"][stage][value][:, order])
    np.testing.assert_array_equal(other["ticks"], plain["ticks"][:, order])
