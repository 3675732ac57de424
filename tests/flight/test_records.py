"""The header's structures as numpy records."""

from __future__ import annotations

import random

import numpy as np
import pytest

from pyharness.exact.fields import CONFIG, INPUTS, OUTPUTS, STATE, Field
from pyharness.flight.records import columns, from_columns, to_columns, to_dict, to_record, to_tuple


def names(struct, prefix="") -> list[str]:
    """Column names from the exact model's own list of fields."""
    found = []
    for item in struct:
        if isinstance(item, Field):
            found += [f"{prefix}{item.name}"] if item.count == 1 else [f"{prefix}{item.name}[{i}]" for i in range(item.count)]
        else:
            found += names(item.struct, f"{prefix}{item.name}.")
    return found


@pytest.mark.parametrize(("kind", "struct"), [("config", CONFIG), ("inputs", INPUTS), ("outputs", OUTPUTS), ("state", STATE)])
def test_fields_and_order_are_those_of_the_exact_model(library, kind, struct):
    assert columns(getattr(library.interface, kind)) == names(struct)


def test_columns_round_trip(library):
    dtype = library.interface.outputs
    draw = random.Random(3)
    low = np.array([[np.iinfo(np.int16).min] * len(columns(dtype))])
    table = np.array([[draw.randint(0, 32767) for _ in columns(dtype)] for _ in range(20)])
    np.testing.assert_array_equal(to_columns(from_columns(dtype, table)), table)
    signed = columns(dtype).index("ticks[1]")
    assert to_columns(from_columns(dtype, low))[0, signed] == -32768


def test_dicts_round_trip(library):
    dtype = library.interface.inputs
    record = np.zeros(1, dtype)
    record["path"]["mag_raw"] = (-1, 2, -32768)
    record["separation_s"] = 2**32 - 1
    values = to_dict(record[0])
    assert values["path"]["mag_raw"] == (-1, 2, -32768)
    assert np.array([to_tuple(dtype, values)], dtype) == record
    assert to_record(dtype, values) == record[0]


def test_unknown_fields_and_too_large_integers_are_refused(library):
    with pytest.raises(KeyError, match="no field 'nonsense' here"):
        to_record(library.interface.inputs, {"path": {"nonsense": 1}})
    with pytest.raises(OverflowError):
        to_record(library.interface.inputs, {"command": 65536})
