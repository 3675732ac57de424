"""Promise 1: the C equals the exact model, integer for integer, for any legal configuration and any inputs."""

from __future__ import annotations

import numpy as np
import pytest
from exact.samples import make_config
from exact.test_exact_init import CASES
from fsw_c.runs import Bank
from hypothesis import given, settings
from strategies import Seeded, any_config, any_inputs, any_path_config, flights

from pyharness import exact
from pyharness.flight import Library
from pyharness.flight.records import to_dict, to_record

ROWS = 100_000
CYCLES = 200


def assert_equal_run(library: Library, config: dict, sequence: list[dict]) -> np.ndarray:
    bank = Bank(library, config)
    outputs = bank.run(sequence)
    state = exact.reset()
    for row, inputs in enumerate(sequence):
        state, want = exact.step(state, config, inputs)
        assert to_dict(outputs[row]) == want, f"row {row}"
    assert to_dict(bank.state[0]) == state
    return outputs


@given(flights())
@settings(max_examples=400)
def test_any_configuration_any_inputs(library, flight):
    config, sequence = flight
    assert_equal_run(library, config, sequence)


@pytest.mark.parametrize("part", range(4))
def test_a_hundred_thousand_rows(library, part):
    """Drawn configurations, flown for 200 cycles each; a quarter of the rows in each part."""
    reached = {"derivative": 0, "saturated": 0, "rate law": 0, "normalised": 0, "blanked": 0, "rows": 0}
    for seed in range(part, ROWS // CYCLES, 4):
        source = Seeded(seed)
        config = any_config(source)
        outputs = assert_equal_run(library, config, any_inputs(source, config, CYCLES))
        trace, status = outputs["trace"], outputs["status"]
        reached["rows"] += len(outputs)
        reached["derivative"] += int(trace["derivative"]["valid"].sum())
        reached["saturated"] += int(((status >> 13) & 7 != 0).sum())
        reached["rate law"] += int((trace["law"]["active"] == 2).sum())
        reached["normalised"] += int((trace["law"]["active"] != 0).sum()) * (config["path"]["gain_scaling"] == 2)
        reached["blanked"] += int((status >> 5 & 1).sum())
    assert reached["rows"] == ROWS // 4
    for stage in ("derivative", "saturated", "rate law", "normalised", "blanked"):
        assert reached[stage] > 0.01 * reached["rows"], reached


@pytest.mark.parametrize("number", range(len(CASES)))
def test_init_agrees_on_either_side_of_every_boundary(library, number):
    code, legal, broken = CASES[number]
    for changes, answer in ((legal, 0), (broken, code)):
        config = make_config(changes)
        assert library.init(to_record(library.interface.config, config)) == exact.init(config) == answer


@pytest.mark.parametrize("seed", range(300))
def test_init_agrees_on_legal_and_broken_configurations(library, seed):
    """A legal configuration is accepted; with any one integer changed both give the same answer."""
    source = Seeded(seed)
    config = any_config(source)
    record = to_record(library.interface.config, config)
    assert library.init(record) == exact.init(config) == 0
    raw = record.view()
    flat = np.frombuffer(raw.tobytes(), np.uint16).copy()
    for _ in range(20):
        broken = flat.copy()
        broken[source.integer(0, len(flat) - 1)] = source.integer(0, 65535)
        changed = np.frombuffer(broken.tobytes(), library.interface.config)[0].copy()
        if source.integer(0, 1):  # with the digest that goes with it, so that the other checks decide
            changed["digest"] = exact.config_digest(to_dict(changed))
        assert library.init(changed) == exact.init(to_dict(changed))


@pytest.mark.parametrize("seed", range(60))
def test_the_path_alone_equals_exact(library, seed):
    """mrd_path_sense, _drive and _commit, for a team with modes of its own."""
    source = Seeded(1000 + seed)
    config = any_path_config(source)
    whole = any_config(source) | {"path": config}
    ffi, lib, interface = library.ffi, library.lib, library.interface
    c_config = ffi.from_buffer("mrd_path_config[]", to_record(interface.config["path"], config).reshape(1))
    c_state, c_trace = np.zeros(1, interface.state["path"]), np.zeros(1, interface.outputs["trace"])
    state_pointer = ffi.from_buffer("mrd_path_state[]", c_state)
    trace_pointer = ffi.from_buffer("mrd_trace[]", c_trace)
    lib.mrd_path_reset(state_pointer)
    assert lib.mrd_path_check(c_config) == exact.path_check(config) == 0
    state = exact.path_reset()
    for row, inputs in enumerate(any_inputs(source, whole, 50)):
        record = to_record(interface.inputs["path"], inputs["path"]).reshape(1)
        waive = row % 7 == 0
        c_inputs = ffi.from_buffer("mrd_path_inputs[]", record)
        status = lib.mrd_path_sense(state_pointer, c_config, c_inputs, waive, trace_pointer)
        status |= lib.mrd_path_drive(c_config, trace_pointer)
        state, trace, sensed = exact.path_sense(state, config, inputs["path"], waive)
        trace, drove = exact.path_drive(config, trace)
        assert status == sensed | drove
        assert to_dict(c_trace[0]) == trace, f"row {row}"
        ticks = trace["pulses"]["ticks"] if row % 3 else (0, 0, 0)
        lib.mrd_path_commit(state_pointer, c_config, c_inputs, ffi.new("int16_t[3]", list(ticks)))
        state = exact.path_commit(state, config, inputs["path"], ticks)
        assert to_dict(c_state[0]) == state, f"row {row}"


@pytest.mark.parametrize("seed", range(80))
def test_upsets_are_answered_alike(library, seed):
    """A flipped bit in the state, then one in the configuration, then the configuration mended: the same integers, the same state."""
    source = Seeded(9000 + seed)
    config = any_config(source)
    sequence = any_inputs(source, config, 60)
    bank = Bank(library, config)
    sound = bank.config.copy()
    state, reached = exact.reset(), 0
    for row, inputs in enumerate(sequence):
        if row in (15, 16, 30):
            flip(source, bank.state)
            state = to_dict(bank.state[0])
        if row in (40, 41):
            flip(source, bank.config)
        if row == 43:
            bank.config[...] = sound
        outputs = bank.run([inputs])
        state, want = exact.step(state, to_dict(bank.config[0]), inputs)
        assert to_dict(outputs[0]) == want, f"row {row}"
        assert to_dict(bank.state[0]) == state, f"row {row}"
        reached |= want["status"]
    assert reached >> 21 & 3


def flip(source: Seeded, record: np.ndarray) -> None:
    """Flip one bit of a record; in padding it changes nothing."""
    raw = np.frombuffer(record.tobytes(), np.uint8).copy()
    raw[source.integer(0, len(raw) - 1)] ^= 1 << source.integer(0, 7)
    record[...] = np.frombuffer(raw.tobytes(), record.dtype)


@pytest.mark.parametrize("seed", range(40))
def test_a_run_in_two_parts_equals_the_whole(library, seed):
    source = Seeded(5000 + seed)
    config = any_config(source)
    sequence = any_inputs(source, config, 60)
    whole = Bank(library, config).run(sequence)
    split = source.integer(1, 59)
    first = Bank(library, config)
    begun = first.run(sequence[:split])
    second = Bank(library, config)
    second.state[...] = first.state
    np.testing.assert_array_equal(np.concatenate([begun, second.run(sequence[split:])]), whole)


def test_constants_of_the_model_are_those_of_the_header(library):
    from pyharness.exact import constants

    ours = {name: value for name, value in vars(constants).items() if name.startswith("MRD_")}
    assert ours == {name: value for name, value in library.interface.header.constants.items() if name in ours}
    assert set(library.interface.header.constants) - set(ours) <= {"MRD_VERSION", "MRD_AXES"}
