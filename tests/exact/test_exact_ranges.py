"""The table of ranges: complete, within the declared widths, and able to fail."""

import re
from pathlib import Path

import pytest
from exact.samples import (
    FIELD,
    SENSOR,
    SUPERVISOR,
    make_config,
    make_inputs,
    make_state,
    path_config,
    path_inputs,
    path_state,
)

from pyharness.exact import FIELDS, RANGES, RangeError, constants, path_drive, path_sense, step
from pyharness.exact.agreement import residual_of
from pyharness.exact.ballot import vote
from pyharness.exact.derivative import differentiate, factor_of
from pyharness.exact.estimate import rate_across_field, turn_of_field
from pyharness.exact.law import gain_used
from pyharness.exact.path import path_reset, zero_trace
from pyharness.exact.progress import no_progress_yet, watch
from pyharness.exact.ranges import check, check3

HEADER = Path(__file__).parents[2] / "fsw_c" / "include" / "mrd.h"


def row_of(struct, name):
    """The name in the table of a flat field; the elements of an array share it."""
    name = re.sub(r"\[\d\]", "", name)
    return name.removeprefix("trace.") if name.startswith("trace.") else f"{struct}.{name}"


@pytest.mark.parametrize("struct", FIELDS)
def test_every_field_has_a_range_within_its_width(struct):
    for field in FIELDS[struct]:
        declared = RANGES[row_of(struct, field.name)]
        assert field.lo <= declared.lo < declared.hi <= field.hi, field.name


def test_every_row_says_what_it_is():
    for name, entry in RANGES.items():
        assert entry.lo < entry.hi and entry.unit and entry.meaning, name


def test_every_name_that_the_stages_check_is_in_the_table():
    used = set()
    for source in Path(path_sense.__code__.co_filename).parent.glob("*.py"):
        used |= set(re.findall(r'check3?\("([a-z_.]+)"', source.read_text()))
    assert len(used) > 55 and not {name for name in used if not name.endswith(".")} - set(RANGES)


@pytest.mark.parametrize("name", RANGES)
def test_every_range_is_closed_and_raises_beyond(name):
    lo, hi, unit, meaning = RANGES[name]
    assert check(name, lo) == lo and check3(name, (lo, hi, lo)) == (lo, hi, lo)
    for bad in (lo - 1, hi + 1):
        with pytest.raises(RangeError) as caught:
            check(name, bad)
        error = caught.value
        assert (error.name, error.value, error.range) == (name, bad, (lo, hi, unit, meaning))
        assert str(caught.value) == f"{name}: {bad} {unit} ({meaning}), must be in {lo}:{hi}"
        for axis in range(3):
            with pytest.raises(RangeError):
                check3(name, tuple(bad if i == axis else lo for i in range(3)))


def drive(config, **parts):
    trace = zero_trace()
    trace["gate"]["trusted"] = trace["derivative"]["valid"] = trace["calibration"]["rate_valid"] = 1
    trace["plausibility"]["norm_sq"] = 40_000
    for part, values in parts.items():
        trace[part] = {**trace[part], **values}
    return path_drive(config, trace)


KNOWN = {**path_state(), "field_valid": 1, "sample_us": 1_040_000}


@pytest.mark.parametrize(("name", "violate"), [
    ("calibration.sum", lambda: path_sense(
        path_reset(), path_config(mag={**SENSOR,
            "matrix": (32767,) * 9}), path_inputs(mag_raw=(32766,) * 3), 0)),
    ("calibration.value", lambda: path_sense(
        path_reset(), path_config(mag={**SENSOR, "offset": (-(2**31), 0, 0)}), path_inputs(), 0)),
    ("derivative.interval", lambda: factor_of(100_000, 32_764)),
    ("derivative.quotient", lambda: factor_of(100_000, 49_000)),
    ("derivative.difference", lambda: differentiate({**KNOWN, "field": (-60_000, 0, 0)}, path_config(), FIELD,
        1_140_000, 1)),
    ("low_pass.error", lambda: path_sense(
        {**KNOWN, "filter_valid": 1, "filter": (0, 2**31 - 1, 0)}, path_config(), path_inputs(), 0)),
    ("low_pass.product", lambda: path_sense(
        {**KNOWN, "filter_valid": 1, "filter": (0, 8_388_352, 0)}, path_config(filter_gain=2**17),
        path_inputs(), 0)),
    ("law.product", lambda: drive(path_config(), low_pass={"filtered": (0, 0, 2**17)})),
    ("law.cross", lambda: drive(path_config(law=2), calibration={"rate": (2**17, 0, 0),
        "field": (0, 32767, 0)})),
    ("law.mantissa", lambda: drive(path_config(derivative_gain={"mantissa": (32767,) * 3,
        "shift": (15,) * 3}))),
    ("law.shift", lambda: drive(path_config(derivative_gain={"mantissa": (32768,) * 3,
        "shift": (15, 32, 15)}))),
    ("law.norm", lambda: gain_used(
        path_config(gain_scaling=2, norm_min_sq=1), {"mantissa": (32768,) * 3, "shift": (0,) * 3}, 32767)),
    ("law.scaled", lambda: gain_used(path_config(gain_scaling=2),
        {"mantissa": (65536,) * 3, "shift": (0,) * 3}, 32768)),
    ("pulses.product", lambda: drive(
        path_config(window_ticks=16385), low_pass={"filtered": (0, 0, -32767)})),
    ("pulses.ticks", lambda: drive(
        path_config(window_ticks=16384, polarity=(2, 1, 1)), low_pass={"filtered": (-32767, 0, 0)})),
    ("estimate.sum_sq", lambda: turn_of_field((32768, 32767, 32767), 200)),
    ("estimate.norm", lambda: turn_of_field((0, 0, 0), 56755)),
    ("estimate.product", lambda: rate_across_field({**SUPERVISOR, "estimate_mantissa": 65538}, 65535)),
    ("ballot.level", lambda: vote({"level": 66, "tripped": 0}, False)),
    ("continuity.difference", lambda: path_sense({**KNOWN, "field": (-60_000, 0, 0)}, path_config(),
        path_inputs(), 0)),
    ("continuity.norm_change", lambda: path_sense({**KNOWN, "norm_known": 1, "norm": 80_000}, path_config(),
        path_inputs(), 0)),
    ("agreement.mean_rate", lambda: path_sense({**KNOWN, "rate_known": 1, "rate": (80_000, 0, 0)},
        path_config(agree_limit=1), path_inputs(), 0)),
    ("agreement.residual", lambda: residual_of({"agree_mantissa": 65535, "agree_shift": 0}, (0, 0, 0),
        (0, 32767, -32767), (0, 32767, 32767))),
    ("progress.window", lambda: watch({**no_progress_yet(), "window": 2**32 - 1}, SUPERVISOR, 0,
        {"turn": 0, "across": 0, "across_valid": 0})),
    ("inputs.path.mag_raw", lambda: path_sense(path_reset(), path_config(),
        path_inputs(mag_raw=(32768, 0, 0)), 0)),
    ("inputs.path.sample_us", lambda: path_sense(path_reset(), path_config(),
        path_inputs(sample_us=2**32), 0)),
    ("inputs.command_ticks", lambda: step(make_state(), make_config(),
        make_inputs(changes={"command_ticks": -32769}))),
])
def test_a_violated_range_stops_the_step_and_names_the_value(name, violate):
    with pytest.raises(RangeError) as caught:
        violate()
    assert caught.value.name == name


def struct_members(body):
    """(type, name, count) of every member of a struct's text; count 1 for a scalar."""
    body = re.sub(r"/\*.*?\*/", "", body, flags=re.S)
    return [(kind, name, int(count.replace("MRD_AXES", "3") or 1) if count else 1)
            for kind, name, count in re.findall(r"(\w+)\s+(\w+)(?:\[(\w+)\])?;", body)]


def test_fields_are_those_of_the_header_in_its_order():
    typedefs = re.findall(r"typedef struct \{(.*?)\}\s*(\w+);", HEADER.read_text(), flags=re.S)
    structs = {name: struct_members(body) for body, name in typedefs}

    def flat(struct, prefix=""):
        for kind, name, count in structs[struct]:
            if kind in structs:
                for i in range(count):
                    yield from flat(kind, f"{prefix}{name}[{i}]." if count > 1 else f"{prefix}{name}.")
            else:
                signed, bits = re.fullmatch(r"(u?)int(\d+)_t", kind).groups()
                yield prefix + name, int(bits), not signed, count

    for name, fields in FIELDS.items():
        assert [tuple(field) for field in fields] == list(flat(f"mrd_{name}"))


def test_constants_are_those_of_the_header():
    text = re.sub(r"/\*.*?\*/", "", HEADER.read_text(), flags=re.S)
    declared = {name: int(value) for name, value in re.findall(r"(MRD_\w+) = (\d+)", text)}
    assert declared == {name: value for name, value in vars(constants).items() if name.startswith("MRD_")}
