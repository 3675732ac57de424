"""Whole steps on any legal configuration and any inputs, and the strategies themselves."""

import re
from collections import Counter
from copy import deepcopy

from exact.samples import fly, lookup, make_config, make_inputs, make_state, with_changes
from hypothesis import given, settings
from hypothesis import strategies as st
from strategies import Seeded, any_config, any_inputs, configs, flights, inputs_sequences, path_configs

from pyharness.exact import (
    FIELDS,
    RANGES,
    init,
    path_check,
    path_commit,
    path_drive,
    path_reset,
    path_restore,
    path_sense,
    path_withhold,
    reset,
)
from pyharness.exact.constants import (
    MRD_COMMAND_RESUME,
    MRD_GAIN_NORMALISED,
    MRD_LAW_RATE,
    MRD_MODE_BENCH,
    MRD_MODE_DAMPING,
    MRD_OK,
    MRD_S_BLANKED,
    MRD_S_COMMAND_REFUSED,
    MRD_S_CONFIG_CORRUPT,
    MRD_S_COUNT,
    MRD_S_DIVERGING,
    MRD_S_FELL_BACK,
    MRD_S_MAG_FROZEN,
    MRD_S_STATE_RESTARTED,
)
from pyharness.exact.modes import obey


def elements(record, fields):
    for field in fields:
        value = lookup(record, field.name)
        if field.count > 1:
            assert isinstance(value, tuple) and len(value) == field.count, field.name
        for element in value if field.count > 1 else (value,):
            yield field, element


def shape(record):
    """Names of a record and of what is nested in it."""
    return {name: shape(value) for name, value in record.items() if isinstance(value, dict)} | {
        name: None for name, value in record.items() if not isinstance(value, dict)}


@settings(max_examples=40)
@given(flights())
def test_outputs_and_state_are_complete_in_range_and_arguments_unchanged(flight):
    config, sequence = flight
    before = deepcopy((config, sequence))
    state = reset()
    first = shape(state)
    for inputs in sequence:
        kept = deepcopy(state)
        after, (out,) = fly(config, [inputs], state)
        assert state == kept and shape(after) == first
        for field, element in elements(out, FIELDS["outputs"]):
            assert type(element) is int and field.lo <= element <= field.hi, field.name
        for field, element in elements(after, FIELDS["state"]):
            declared = RANGES["state." + re.sub(r"\[\d\]", "", field.name)]
            assert type(element) is int and declared.lo <= element <= declared.hi, field.name
        state = after
    assert (config, sequence) == before


@settings(max_examples=40)
@given(flights(), st.integers(0, 8))
def test_a_run_in_two_parts_equals_the_whole_run(flight, cut):
    config, sequence = flight
    whole_state, whole = fly(config, sequence)
    state, first = fly(config, sequence[:cut])
    state, second = fly(config, sequence[cut:], state)
    assert (state, first + second) == (whole_state, whole)


@settings(max_examples=40)
@given(flights())
def test_counters_count_what_the_status_says(flight):
    config, sequence = flight
    state, outputs = fly(config, sequence)
    trusted = sum(out["trace"]["gate"]["trusted"] for out in outputs)

    def cycles(*bits):
        return sum(any(out["status"] >> bit & 1 for bit in bits) for out in outputs)

    assert state["counters"] == outputs[-1]["counters"] == {
        "trusted": trusted, "rejected": len(outputs) - trusted, "blanked": cycles(MRD_S_BLANKED),
        "fell_back": cycles(MRD_S_FELL_BACK), "refused": cycles(MRD_S_COMMAND_REFUSED), "restarts": 0, "corrupt": 0,
        "mag_faults": cycles(1, 2, 23, 24, 25, 26), "gyro_faults": cycles(10, 11, 27, 28),
        "coil_faults": cycles(4, 29), "time_faults": cycles(3, 7, 8),
        "trips": sum(out["status"] >> MRD_S_DIVERGING & 1 and before == MRD_MODE_DAMPING
                     for out, before in zip(outputs, [0, *(out["mode"] for out in outputs)])),
    }


@settings(max_examples=40)
@given(flights())
def test_a_step_is_the_path_with_the_modes_around_it(flight):
    config, sequence = flight
    state, path = reset(), path_reset()
    for inputs in sequence:
        mode, _, _, _ = obey(state["mode"], state["inhibit_commanded"], config["supervisor"], inputs)
        waive = mode == MRD_MODE_BENCH
        if state["mode"] == MRD_MODE_BENCH and not waive:
            path = {**path, "field_valid": 0, "filter_valid": 0}
        refused = obey(state["mode"], state["inhibit_commanded"], config["supervisor"], inputs)[3]
        if inputs["command"] == MRD_COMMAND_RESUME and not refused:
            path = path_restore(path)
        path, trace, sensed = path_sense(path, config["path"], inputs["path"], waive)
        trace, driven = path_drive(config["path"], trace)
        state, (out,) = fly(config, [inputs], state)
        path = path_commit(path, config["path"], inputs["path"], out["ticks"])
        assert ({**out["trace"], "estimate": trace["estimate"]}, state["path"]) == (trace, path)
        assert out["status"] & (sensed | driven) == sensed | driven
        if out["mode"] == MRD_MODE_DAMPING:
            assert out["ticks"] == path_withhold(path, trace["pulses"]["ticks"])


def test_counters_stop():
    full = {f"counters.{name}": 65535 for name in reset()["counters"]}
    sequence = [make_inputs(1, {"command": 99, "path.gyro_valid": 0, "path.mag_raw": (32767, 0, 0),
                                "path.sample_us": 0}),
                make_inputs(2, {"path.mag_valid": 0, "path.switch_off_us": (7, 7, 7)})]
    state, _ = fly(make_config({"path.law": MRD_LAW_RATE}), sequence, make_state(full))
    assert set(state["counters"].values()) == {65535}


def test_stamps_wrap_without_a_trace():
    """The same flight, begun early and just before the wrap, differs in no output."""
    runs = []
    for offset in (0, 2**32 - 1_250_000):
        sequence = []
        for k in range(6):
            inputs = make_inputs(k, {"path.mag_raw": (10_000 + 100 * k, -5_000, 2_000)})
            path = inputs["path"]
            sequence.append(with_changes(inputs, {
                "path.cycle_start_us": (path["cycle_start_us"] + offset) % 2**32,
                "path.sample_us": (path["sample_us"] + offset) % 2**32,
                "path.switch_off_us": tuple((stamp + offset) % 2**32 for stamp in path["switch_off_us"]),
            }))
        runs.append(fly(make_config(), sequence)[1])
    assert runs[0] == runs[1] and runs[0][-1]["trace"]["derivative"]["derivative"] == (100, 0, 0)


# ---- the strategies ----

@settings(max_examples=100)
@given(configs())
def test_every_configuration_drawn_is_legal(config):
    assert init(config) == MRD_OK


@settings(max_examples=50)
@given(path_configs())
def test_every_configuration_of_a_path_drawn_is_legal(path):
    assert path_check(path) == MRD_OK


@settings(max_examples=30)
@given(st.data())
def test_every_sequence_drawn_has_its_length_and_fits_its_types(data):
    sequence = data.draw(inputs_sequences(data.draw(configs()), 4))
    assert len(sequence) == 4
    for inputs in sequence:
        for field, element in elements(inputs, FIELDS["inputs"]):
            assert type(element) is int and field.lo <= element <= field.hi, field.name


def test_sequences_reach_every_kind_of_stamp():
    """A pulse is stamped, or waits with a stamp from before it or with none; a stamp grows old, and wraps."""
    seen = Counter()
    for seed in range(250):
        source = Seeded(seed)
        config, state = any_config(source), make_state()
        for inputs in any_inputs(source, config, 20):
            before = state["path"]
            state, (out,) = fly(config, [inputs], state)
            for i in range(3):
                fresh = inputs["path"]["switch_off_us"][i] != before["switch_off_us"][i]
                waits = before["pending"][i] and state["path"]["pending"][i] and not out["ticks"][i]
                seen["stamped"] += bool(before["pending"][i]) and not waits
                seen["stale"] += bool(waits) and fresh
                seen["missing"] += bool(waits) and not fresh
                seen["old"] += not fresh and bool(before["off_clear"][i] and state["path"]["off_clear"][i])
                seen["wrapped"] += not fresh and out["trace"]["gate"]["age_us"][i] == 2**31 - 1
    assert seen["stamped"] > 500 and len(seen) == 5 and min(seen.values()) > 10, seen


def test_sequences_reach_the_deep_stages():
    """Shares of cycles; every status bit of a sound controller is seen, those of the faults in many cycles."""
    seen, bits, rows = Counter(), Counter(), 0
    for seed in range(60):
        source = Seeded(seed)
        config = any_config(source)
        for out in fly(config, any_inputs(source, config, 200))[1]:
            rows += 1
            trace = out["trace"]
            acted = trace["law"]["active"]
            seen["derivative"] += trace["derivative"]["valid"]
            seen["saturated"] += bool(out["status"] >> 13 & 7)
            seen["rate law"] += acted == MRD_LAW_RATE
            seen["normalised"] += bool(acted) and config["path"]["gain_scaling"] == MRD_GAIN_NORMALISED
            seen["pulses"] += any(out["ticks"])
            seen["judged"] += trace["agreement"]["judged"]
            bits.update(bit for bit in range(MRD_S_COUNT) if out["status"] >> bit & 1)
    shares = {name: count / rows for name, count in seen.items()}
    assert shares["derivative"] > 0.35 and min(shares.values()) > 0.05, shares
    assert set(range(MRD_S_COUNT)) - set(bits) == {MRD_S_STATE_RESTARTED, MRD_S_CONFIG_CORRUPT}
    faults = {bit: bits[bit] / rows for bit in range(MRD_S_MAG_FROZEN, MRD_S_COUNT)}
    assert min(faults.values()) > 0.003, faults
