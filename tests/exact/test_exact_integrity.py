"""Digests: their step against published vectors, flipped bits; what a failed digest leads to."""

from functools import reduce
from itertools import combinations

import pytest
from exact.samples import fly, lookup, make_config, make_inputs, make_state, with_changes

from pyharness.exact import FIELDS, config_digest, init, reset, state_digest, step
from pyharness.exact.constants import (
    MRD_COMMAND_BENCH,
    MRD_COMMAND_RESUME,
    MRD_E_DIGEST,
    MRD_MODE_BENCH,
    MRD_MODE_DAMPING,
    MRD_MODE_HOLD_OFF,
    MRD_MODE_INHIBIT,
    MRD_MODE_PAUSE,
    MRD_MODE_SAFE,
    MRD_MODE_SETTLED,
    MRD_S_CONFIG_CORRUPT,
    MRD_S_STATE_RESTARTED,
    MRD_S_SWITCH_OFF_UNSTAMPED,
)
from pyharness.exact.integrity import BASIS, fnv1a
from pyharness.exact.path import path_reset, zero_trace


# Fowler, Noll and Vo, FNV-1a, 32 bits, test vectors of the authors' reference code (from memory): the
# multiplying step alone, over bytes.
@pytest.mark.parametrize(("text", "digest"), [
    (b"", 0x811C9DC5), (b"a", 0xE40C292C), (b"b", 0xE70C2DE5), (b"foobar", 0xBF9CF968),
])
def test_the_step_against_the_published_vectors_of_fnv1a(text, digest):
    assert reduce(fnv1a, text, BASIS) == digest


def with_bit_flipped(value, field, i, bit):
    """The value of a field with one bit of its element i flipped."""
    elements = value if field.count > 1 else (value,)
    flipped = (elements[i] ^ 1 << bit) & (1 << field.bits) - 1
    if field.signed and flipped >> field.bits - 1:
        flipped -= 1 << field.bits
    return (*elements[:i], flipped, *elements[i + 1:]) if field.count > 1 else flipped


def flips(record, fields):
    """Every record that differs in one bit of one field, with the field's name."""
    for field in fields:
        value = lookup(record, field.name)
        for i in range(field.count):
            for bit in range(field.bits):
                yield field.name, with_changes(record, {field.name: with_bit_flipped(value, field, i, bit)})


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


@pytest.mark.parametrize(("record", "fields", "digest", "pairs"), [
    (make_config(), FIELDS["config"][:-1], config_digest, 16 * 15 // 2),
    (make_state(), FIELDS["state"][:-1], state_digest, 12 * 11 // 2),
])
def test_bit_31_flipped_in_two_fields_changes_the_digest(record, fields, digest, pairs):
    """The product alone would let such a pair cancel: bit 31 times an odd factor is bit 31."""
    elements = [(field, i) for field in fields if field.bits == 32 for i in range(field.count)]
    tried = 0
    for pair in combinations(elements, 2):
        changed = record
        for field, i in pair:
            flipped = with_bit_flipped(lookup(changed, field.name), field, i, 31)
            changed = with_changes(changed, {field.name: flipped})
        assert digest(changed) != record["digest"], pair
        tried += 1
    assert tried == pairs


def test_the_digest_itself_is_left_out():
    assert config_digest(make_config()) == config_digest({**make_config(), "digest": 5})
    assert state_digest(reset()) == state_digest({**reset(), "digest": 5}) == reset()["digest"]


def test_negative_fields_fold_as_unsigned_of_their_width():
    """A digest by the definition, field by field, for a state with one value of each sign and width."""
    state = with_changes(reset(), {"path.filter": (-1, 2, 0), "path.field": (-2, 0, 0), "path.weak[1].level": 4})
    filtered, stamps, field = [2**32 - 1, 2, 0], [0] * 7, [65534, 0, 0]
    flags, ticks, mag, noise_and_jumping, gyro, rate = [0] * 9, [0] * 3, [0] * 9, [0] * 4, [0] * 5, [0] * 4
    agreement, weak, backward = [0] * 2, [0, 0, 4, 0, 0, 0], [0] * 6
    dwell, mode, inhibit_commanded, trips, cycle, progress, counters = 0, 3, 0, 0, 0, [0] * 7, [0] * 12
    h = 2166136261
    for word in (*filtered, *stamps, *field, *flags, *ticks, *mag, *noise_and_jumping, *gyro, *rate, *agreement, *weak,
                 *backward, dwell, mode, inhibit_commanded, trips, cycle, *progress, *counters):
        h = (h ^ word) * 16777619 % 2**32
        h = h ^ h // 2**15
    assert state_digest(state) == h


def test_reset_is_all_zero_but_the_mode():
    state = reset()
    assert state["path"] == path_reset() and not any(state["counters"].values())
    assert (state["mode"], state["dwell"], state["inhibit_commanded"]) == (MRD_MODE_HOLD_OFF, 0, 0)


# ---- a state that fails its digest ----

def corrupt(changes):
    """A state with dotted changes and a wrong digest."""
    sound = make_state(changes)
    return {**sound, "digest": sound["digest"] ^ 1}


# Mode and inhibit_commanded before a restart; mode after two steps before the separation time, and after it.
RESTARTS = [
    ((MRD_MODE_HOLD_OFF, 0), (MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING)),
    ((MRD_MODE_DAMPING, 0), (MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING)),
    ((MRD_MODE_DAMPING, 1), (MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING)),
    ((MRD_MODE_SETTLED, 0), (MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING)),
    ((MRD_MODE_INHIBIT, 0), (MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING)),
    ((MRD_MODE_PAUSE, 0), (MRD_MODE_PAUSE, MRD_MODE_PAUSE)),
    *[((MRD_MODE_INHIBIT, inhibited), (MRD_MODE_INHIBIT, MRD_MODE_INHIBIT)) for inhibited in (65535, 65534, 32767, 3)],
    # One bit alone is a flip of 0: low power, which ends by itself.
    *[((MRD_MODE_INHIBIT, 1 << bit), (MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING)) for bit in (0, 7, 15)],
    *[((mode, inhibited), (MRD_MODE_SAFE, MRD_MODE_SAFE))
      for mode in (MRD_MODE_SAFE, MRD_MODE_BENCH, 0, 1, 2, 4, 7, 11, 14, 77, 65535) for inhibited in (0, 1)],
]


@pytest.mark.parametrize(("before", "after"), RESTARTS)
def test_a_restart_keeps_of_the_mode_what_keeps_coils_off(before, after):
    mode, inhibited = before
    for separation_s, expected in zip((599, 600), after):
        inputs = make_inputs(changes={"separation_s": separation_s})
        state, out = step(corrupt({"mode": mode, "inhibit_commanded": inhibited}), make_config(), inputs)
        through_hold_off = expected in (MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING)
        assert out["status"] >> MRD_S_STATE_RESTARTED & 1
        assert out["mode"] == (MRD_MODE_HOLD_OFF if through_hold_off else expected)
        assert (out["cycle"], state["cycle"], state["trips"]) == (0, 1, 0)
        state, out = step(state, make_config(), {**inputs, "path": make_inputs(2)["path"]})
        assert not out["status"] >> MRD_S_STATE_RESTARTED & 1 and out["mode"] == state["mode"] == expected
        assert state["inhibit_commanded"] == 65535 * (expected == MRD_MODE_INHIBIT)
        inputs = {**inputs, "low_power": 1}
        state, out = step(corrupt({"mode": mode, "inhibit_commanded": inhibited}), make_config(), inputs)
        assert out["mode"] == (MRD_MODE_INHIBIT if through_hold_off else expected)
        assert state["inhibit_commanded"] == 65535 * (expected == MRD_MODE_INHIBIT)


def test_a_command_meets_the_restarted_mode():
    armed = make_inputs(changes={"command": MRD_COMMAND_BENCH, "command_ticks": 5})
    state, out = step(corrupt({"mode": MRD_MODE_BENCH}), make_config(), armed)
    assert (out["mode"], out["ticks"], state["counters"]["refused"]) == (MRD_MODE_SAFE, (0, 0, 0), 1)
    resumed = make_inputs(changes={"command": MRD_COMMAND_RESUME})
    assert step(corrupt({"mode": 77}), make_config(), resumed)[1]["mode"] == MRD_MODE_HOLD_OFF


@pytest.mark.parametrize(("restarts", "counted"), [(0, 1), (65534, 65535), (65535, 65535)])
def test_a_corrupt_state_is_restarted(restarts, counted):
    state, out = step(
        corrupt({"counters.restarts": restarts, "counters.trusted": 9, "dwell": 2, "path.pending": (1, 1, 1),
            "path.drive_us": (9, 9, 9), "path.field_valid": 1, "path.backward[1].tripped": 1, "trips": 2,
            "cycle": 77, "progress.window": 5}), make_config(), make_inputs())
    fresh = reset()
    assert (state["progress"], state["trips"]) == (fresh["progress"], 0)
    assert state["path"]["backward"] == fresh["path"]["backward"] and (out["cycle"], state["cycle"]) == (0, 1)
    assert (state["path"]["pending"], state["path"]["drive_us"]) == ((0, 0, 0), (0, 0, 0))
    assert not out["status"] >> MRD_S_SWITCH_OFF_UNSTAMPED & 1
    assert out["counters"] == state["counters"]
    assert {name: n for name, n in state["counters"].items() if n} == {
        "rejected": 1, "blanked": 1, "restarts": counted}
    assert state["digest"] == state_digest(state) and state["dwell"] == 1  # of HOLD_OFF, separated


def test_any_single_flipped_bit_of_a_state_is_noticed():
    config, inputs = make_config(), make_inputs(3)
    state, _ = fly(config, [make_inputs(i) for i in range(3)])
    for name, changed in list(flips(state, FIELDS["state"]))[::7]:
        _, out = step(changed, config, inputs)
        assert out["status"] >> MRD_S_STATE_RESTARTED & 1, name


# ---- a configuration that fails its digest ----

@pytest.mark.parametrize("command", [MRD_COMMAND_RESUME, MRD_COMMAND_BENCH, 99])
def test_a_corrupt_configuration_leads_to_safe_whatever_is_commanded(command):
    config = make_config()
    state, _ = fly(config, [make_inputs(i, {"path.mag_raw": (10_000 + 50 * i, 0, 0)}) for i in range(3)])
    changed = with_changes(config, {"path.filter_gain": 128})
    assert init(changed) == MRD_E_DIGEST
    state = with_changes(state, {"trips": 2, "progress.peak": (3, 4, 5), "progress.stalled": 1})
    state = {**state, "digest": state_digest(state)}
    after, out = step(state, changed, make_inputs(3, {"command": command}))
    counters = {**state["counters"], "corrupt": 1}
    assert after["path"] == path_reset()
    assert (after["mode"], after["dwell"], after["inhibit_commanded"]) == (MRD_MODE_SAFE, 0, 0)
    assert (after["trips"], after["progress"], after["cycle"]) == (0, reset()["progress"], 4)
    assert after["counters"] == counters
    assert after["digest"] == state_digest(after)
    assert out == {
        "ticks": (0, 0, 0), "mode": MRD_MODE_SAFE, "status": 1 << MRD_S_CONFIG_CORRUPT,
        "rate": 0, "rate_valid": 0, "handover": 0, "cycle": 3,
        "digest": config["digest"], "counters": counters, "trace": zero_trace(),
    }
    _, out = step(after, config, make_inputs(4))
    assert out["mode"] == MRD_MODE_SAFE and not out["status"] >> MRD_S_STATE_RESTARTED & 1
