"""The header's structures as numpy records."""

from __future__ import annotations

import random

import numpy as np
import pytest

from pyharness.exact.fields import CONFIG, INPUTS, OUTPUTS, STATE, Field
from pyharness.flight.records import columns, flip_bit, from_columns, to_columns, to_dict, to_record, to_tuple


def names(struct, prefix="") -> list[str]:
    """Column names from the exact model's own list of fields."""
    found = []
    for item in struct:
        each = [f"{prefix}{item.name}"] if item.count == 1 else [f"{prefix}{item.name}[{i}]" for i in range(item.count)]
        found += each if isinstance(item, Field) else [name for place in each for name in names(item.struct, f"{place}.")]
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


def numbered(dtype: np.dtype, rows: int) -> np.ndarray:
    """Records in which every integer is another, as far as 16 bits go."""
    size = len(columns(dtype))
    return from_columns(dtype, np.arange(rows * size).reshape(rows, size) % 32768)


def test_arrays_of_structs_keep_their_places(library):
    """Three ballots each of weak and backward stand in the state side by side: level, tripped, level, tripped, ..."""
    dtype = library.interface.state
    states = numbered(dtype, 5)
    for coil, ballot in ((0, "weak"), (2, "weak"), (0, "backward"), (2, "backward")):
        for leaf in ("level", "tripped"):
            column = columns(dtype).index(f"path.{ballot}[{coil}].{leaf}")
            assert states["path"][ballot][leaf][:, coil].tolist() == to_columns(states)[:, column].tolist()
            assert states["path"][ballot][leaf][:, coil].tolist() == [row * len(columns(dtype)) + column for row in range(5)]


def test_arrays_of_structs_round_trip(library):
    dtype = library.interface.state
    states = numbered(dtype, 4)
    np.testing.assert_array_equal(from_columns(dtype, to_columns(states)), states)
    for state in states:
        values = to_dict(state)
        assert [ballot["level"] for ballot in values["path"]["weak"]] == state["path"]["weak"]["level"].tolist()
        assert to_record(dtype, values) == state
        assert np.array([to_tuple(dtype, values)], dtype)[0] == state


def test_to_record_wants_every_element_of_an_array_of_structs(library):
    two = ({"level": 1}, {"level": 2})
    with pytest.raises(ValueError, match="shorter"):
        to_record(library.interface.state, {"path": {"weak": two}})
    record = to_record(library.interface.state, {"path": {"weak": (*two, {"tripped": 1})}})
    assert record["path"]["weak"].tolist() == [(1, 0), (2, 0), (0, 1)]


@pytest.mark.parametrize("kind", ["config", "inputs", "state"])
def test_flip_bit_flips_that_bit_of_that_column_and_back(library, kind):
    """Every bit of every column: only that column changes, by that power of two, also in the sign."""
    dtype = getattr(library.interface, kind)
    before = numbered(dtype, 1)
    plain = to_columns(before)[0]
    for place, column in enumerate(columns(dtype)):
        for bit in range(8 * width(dtype, column)):
            flipped = before.copy()
            flip_bit(flipped[0], column, bit)
            changed = to_columns(flipped)[0]
            assert np.flatnonzero(changed != plain).tolist() == [place]
            assert (int(changed[place]) ^ int(plain[place])) % 2 ** (8 * width(dtype, column)) == 1 << bit
            flip_bit(flipped[0], column, bit)
            assert flipped == before


def width(dtype: np.dtype, column: str) -> int:
    """Bytes of one column."""
    for part in column.split("."):
        dtype = dtype[part.partition("[")[0]].base
    return dtype.itemsize


def test_flip_bit_of_a_bit_or_a_column_that_is_none(library):
    state = np.zeros(1, library.interface.state)
    with pytest.raises(ValueError, match="nonsense"):
        flip_bit(state[0], "path.weak[0].nonsense", 0)
    with pytest.raises(IndexError):
        flip_bit(state[0], "path.weak[3].level", 0)
    with pytest.raises(OverflowError):
        flip_bit(state[0], "path.weak[0].level", 16)
    assert not to_columns(state).any()


def test_flip_bit_also_takes_a_record_without_a_dimension(library):
    """As `Controller.peek` hands them out."""
    state = np.zeros((), library.interface.state)
    flip_bit(state, "path.backward[1].tripped", 3)
    assert state["path"]["backward"].tolist() == [(0, 0), (0, 8), (0, 0)]


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
