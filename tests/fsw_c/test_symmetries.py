"""Promise 4, on the C: the law is odd, damps on every axis, and does not care how the axes are called.

The checks keep these symmetries too. Counts that stand still, norm, jump and noise do not know a sign. The residual of the
agreement, dB/dt + ω × B, is odd in the field; in the rate it is not, since a body that turns the other way sees another motion
of the field. A pulse the other way round is healthy if its current is the other way round too.
"""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest
from fsw_c.runs import Bank
from strategies import Seeded, any_config, any_inputs

from pyharness import exact

IDENTITY = {"matrix": (16384, 0, 0, 0, 16384, 0, 0, 0, 16384), "offset": (0, 0, 0), "shift": 14, "limit": 32767}
"""Calibration that hands raw counts through, so that a test can choose calibrated values."""

def checked(seed: int) -> bool:
    """Whether `calibrated` leaves the checks of the sensors as they are drawn."""
    return seed % 2 == 0


UNCHECKED = {"jump_max_sq": 3221028867, "noise_limit": 65535, "frozen_limit": 0, "dead_limit": 0, "gyro_frozen_limit": 0,
             "agree_limit": 0, "current_fitted": 0}  # fmt: skip

SEEDS = range(60)


def calibrated(seed: int, law: int | None = None, **path) -> tuple[dict, list[dict]]:
    """Any legal configuration with identity calibration, and inputs for it; no commands, no low power.

    Every other one is without checks of the sensors, so that the law acts in more than a few cycles.
    """
    source = Seeded(seed)
    config = any_config(source)
    if not checked(seed):
        config["path"] |= UNCHECKED
    config["path"] |= {"mag": IDENTITY, "gyro": IDENTITY, "gyro_fitted": 1, "norm_min_sq": 32768, "norm_max_sq": 3221028867}
    config["path"] |= path
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
    """The negated integers; what 16 bits cannot hold, one short of it."""
    return tuple(min(32767, -v) for v in values)


def acted(outputs: np.ndarray, law: int) -> np.ndarray:
    return outputs["trace"]["law"]["active"] == law


def assert_checks_are_alike(plain: np.ndarray, mirrored: np.ndarray) -> None:
    """The same verdicts on both sides, with the residual negated."""
    np.testing.assert_array_equal(mirrored["status"], plain["status"])
    for stage in ("continuity", "gate", "currents", "plausibility", "estimate"):
        np.testing.assert_array_equal(mirrored["trace"][stage], plain["trace"][stage])
    np.testing.assert_array_equal(mirrored["trace"]["agreement"]["judged"], plain["trace"]["agreement"]["judged"])
    np.testing.assert_array_equal(mirrored["trace"]["agreement"]["residual"], -plain["trace"]["agreement"]["residual"])


@pytest.mark.parametrize("seed", SEEDS)
def test_the_derivative_law_is_odd(library, seed):
    """Odd in field samples and filter state together: a negated run from the start negates every value."""
    config, sequence = calibrated(seed, law=1)
    plain = Bank(library, config).run(sequence)
    mirrored = Bank(library, config).run(changed(sequence, mag_raw=negated, current_driven=negated))
    assert acted(plain, 1).any() or checked(seed)
    for stage, value in (("derivative", "derivative"), ("low_pass", "filter"), ("law", "demand"), ("saturation", "command"),
                         ("pulses", "ticks")):
        np.testing.assert_array_equal(mirrored["trace"][stage][value], -plain["trace"][stage][value])
    np.testing.assert_array_equal(mirrored["ticks"], -plain["ticks"])
    assert_checks_are_alike(plain, mirrored)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("which", ["mag_raw", "gyro_raw"])
def test_the_rate_law_is_odd_in_rate_and_in_field(library, seed, which):
    """Odd in the rate only where the gyro is not held against the field."""
    config, sequence = calibrated(seed, law=2, **({"agree_limit": 0} if which == "gyro_raw" else {}))
    plain = Bank(library, config).run(sequence)
    mirrored = Bank(library, config).run(changed(sequence, **{which: negated, "current_driven": negated}))
    on = acted(plain, 2)
    assert on.any() or checked(seed)
    np.testing.assert_array_equal(acted(mirrored, 2), on)
    for stage, value in (("law", "cross"), ("law", "demand"), ("saturation", "command"), ("pulses", "ticks")):
        np.testing.assert_array_equal(mirrored["trace"][stage][value][on], -plain["trace"][stage][value][on])
    if which == "mag_raw":
        assert_checks_are_alike(plain, mirrored)


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
    by_axis = {name: permuted(path[name]) for name in ("polarity", "blanking_us", "current_min")}
    renamed = {**config, "path": {**path, **gains, **by_axis}}
    renamed["digest"] = exact.config_digest(renamed)
    turned = changed(sequence, mag_raw=permuted, switch_off_us=permuted, current_driven=permuted, current_sampled=permuted,
                     gyro_raw=lambda v: tuple(handed * x for x in permuted(v)))  # fmt: skip
    plain, other = Bank(library, config).run(sequence), Bank(library, renamed).run(turned)
    for stage, value in (("derivative", "derivative"), ("law", "demand"), ("saturation", "command"), ("pulses", "ticks"),
                         ("gate", "age_us"), ("continuity", "same"), ("currents", "fault"), ("agreement", "residual")):
        np.testing.assert_array_equal(other["trace"][stage][value], plain["trace"][stage][value][:, order])
    np.testing.assert_array_equal(other["ticks"], plain["ticks"][:, order])
