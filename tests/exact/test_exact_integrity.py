"""Digests against published vectors and single flipped bits; what a failed digest leads to."""

import pytest
from exact.samples import fly, make_config, make_inputs, make_state, with_changes

from pyharness.exact import FIELDS, config_digest, init, reset, state_digest, step
from pyharness.exact.constants import (
    MRD_E_DIGEST,
    MRD_MODE_DAMPING,
    MRD_MODE_HOLD_OFF,
    MRD_MODE_SAFE,
    MRD_S_CONFIG_CORRUPT,
    MRD_S_STATE_RESTARTED,
)
from pyharness.exact.integrity import fnv1a
from pyharness.exact.path import path_reset, zero_trace


# Fowler, Noll and Vo, FNV-1a, 32 bits, test vectors of the authors' reference code (from memory). Fields of
# 8 bits fold as bytes do.
@pytest.mark.parametrize(("text", "digest"), [
    (b"", 0x811C9DC5), (b"a", 0xE40C292C), (b"b", 0xE70C2DE5), (b"foobar", 0xBF9CF968),
])
def test_fnv1a_against_its_published_vectors(text, digest):
    assert fnv1a(text) == digest


def lookup(record, name):
    for part in name.split("."):
        record = record[part]
    return record


def flips(record, fields):
    """Every record that differs in one bit of one field, with the field's name."""
    for field in fields:
        value = lookup(record, field.name)
        elements = value if field.count > 1 else (value,)
        for i, element in enumerate(elements):
            for bit in range(field.bits):
                flipped = (element ^ 1 << bit) & (1 << field.bits) - 1
                if field.signed and flipped >> field.bits - 1:
                    flipped -= 1 << field.bits
                changed = (*elements[:i], flipped, *elements[i + 1:])
                yield field.name, with_changes(record, {field.name: changed if field.count > 1 else flipped})


def test_every_single_flipped_bit_changes_the_digest_of_a_configuration():
    config = make_config()
    flipped = 0
    for name, changed in flips(config, FIELDS["config"][:-1]):
        assert config_digest(changed) != config["digest"], name
        flipped += 1
    assert flipped == sum(field.bits * field.count for field in FIELDS["config"][:-1])


def test_every_single_flipped_bit_changes_the_digest_of_a_state():
    state, _ = fly(make_config(), [make_inputs(i) for i in range(3)])
    for name, changed in flips(state, FIELDS["state"][:-1]):
        assert state_digest(changed) != state["digest"], name


def test_the_digest_itself_is_left_out():
    assert config_digest(make_config()) == config_digest({**make_config(), "digest": 5})
    assert state_digest(reset()) == state_digest({**reset(), "digest": 5}) == reset()["digest"]


def test_negative_fields_fold_as_unsigned_of_their_width():
    """A digest by the definition, field by field, for a state with one value of each sign and width."""
    state = with_changes(reset(), {"path.filter": (-1, 2, 0), "path.field": (-2, 0, 0)})
    words = [2**32 - 1, 2, 0, 0, 0, 0, 0, 65534, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 3, 0, 0, 0, 0, 0, 0, 0]
    assert state_digest(state) == fnv1a(words)


def test_reset_is_all_zero_but_the_mode():
    state = reset()
    assert state["path"] == path_reset() and not any(state["counters"].values())
    assert (state["mode"], state["dwell"], state["inhibit_commanded"]) == (MRD_MODE_HOLD_OFF, 0, 0)


# ---- a state that fails its digest ----

@pytest.mark.parametrize(("mode", "after"),
    [(MRD_MODE_DAMPING, MRD_MODE_DAMPING), (MRD_MODE_SAFE, MRD_MODE_SAFE), (77, MRD_MODE_DAMPING)])
@pytest.mark.parametrize(("restarts", "counted"), [(0, 1), (65534, 65535), (65535, 65535)])
def test_a_corrupt_state_is_restarted(mode, after, restarts, counted):
    sound = make_state({"mode": mode, "counters.restarts": restarts, "counters.trusted": 9, "dwell": 2})
    state, out = step({**sound, "digest": sound["digest"] ^ 1}, make_config(), make_inputs())
    assert out["status"] >> MRD_S_STATE_RESTARTED & 1 and out["mode"] == after
    assert out["counters"] == state["counters"]
    assert state["counters"] == {"trusted": 0, "rejected": 1, "blanked": 1, "fell_back": 0, "refused": 0,
        "restarts": counted}
    assert state["digest"] == state_digest(state) and state["dwell"] == 0


@pytest.mark.parametrize(("separation_s", "mode"), [(599, MRD_MODE_HOLD_OFF), (600, MRD_MODE_DAMPING)])
def test_hold_off_is_not_begun_again_after_a_restart(separation_s, mode):
    _, out = step({**make_state(), "digest": 1}, make_config(),
        make_inputs(changes={"separation_s": separation_s}))
    assert out["mode"] == mode


def test_any_single_flipped_bit_of_a_state_is_noticed():
    config, inputs = make_config(), make_inputs(3)
    state, _ = fly(config, [make_inputs(i) for i in range(3)])
    for name, changed in list(flips(state, FIELDS["state"]))[::7]:
        _, out = step(changed, config, inputs)
        assert out["status"] >> MRD_S_STATE_RESTARTED & 1, name


# ---- a configuration that fails its digest ----

def test_a_corrupt_configuration_leads_to_safe():
    config = make_config()
    state, _ = fly(config, [make_inputs(i, {"path.mag_raw": (10_000 + 50 * i, 0, 0)}) for i in range(3)])
    corrupt = with_changes(config, {"path.filter_gain": 1})
    assert init(corrupt) == MRD_E_DIGEST
    after, out = step(state, corrupt, make_inputs(3, {"command": 4}))
    counters = state["counters"]
    assert after["path"] == path_reset()
    assert (after["mode"], after["dwell"], after["inhibit_commanded"]) == (MRD_MODE_SAFE, 0, 0)
    assert after["counters"] == counters
    assert after["digest"] == state_digest(after)
    assert out == {
        "ticks": (0, 0, 0), "mode": MRD_MODE_SAFE, "status": 1 << MRD_S_CONFIG_CORRUPT,
        "rate": 0, "rate_valid": 0, "handover": 0,
        "digest": config["digest"], "counters": counters, "trace": zero_trace(),
    }
    _, out = step(after, config, make_inputs(4))
    assert out["mode"] == MRD_MODE_SAFE and not out["status"] >> MRD_S_STATE_RESTARTED & 1
