"""The header's structures as numpy records: one memory layout for C, numpy and files.

A record's *columns* are its integers in declared order, named like C would: `trace.derivative.derivative[2]`.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from functools import cache
from typing import Any

import numpy as np


def dtype_of(ffi: Any, name: str) -> np.dtype:
    """The numpy dtype with the layout that this machine's C compiler gives to the structure `name`."""
    return _convert(ffi, ffi.typeof(name))


def _convert(ffi: Any, ctype: Any) -> np.dtype:
    if ctype.kind == "primitive":
        return np.dtype(ctype.cname.removesuffix("_t"))
    if ctype.kind == "array":
        return np.dtype((_convert(ffi, ctype.item), (ctype.length,)))
    names, fields = zip(*ctype.fields, strict=True)
    return np.dtype(
        {
            "names": names,
            "formats": [_convert(ffi, field.type) for field in fields],
            "offsets": [field.offset for field in fields],
            "itemsize": ffi.sizeof(ctype),
        }
    )


def columns(dtype: np.dtype, prefix: str = "") -> list[str]:
    """Names of all integers of a record, in declared order."""
    if dtype.subdtype:
        return [column for i in range(dtype.shape[0]) for column in columns(dtype.base, f"{prefix}[{i}]")]
    if dtype.names is None:
        return [prefix]
    dot = f"{prefix}." if prefix else ""
    return [column for name in dtype.names for column in columns(dtype[name], dot + name)]


def to_columns(records: np.ndarray) -> np.ndarray:
    """All integers of n records as an int64 array (n, columns)."""
    parts = [_column_block(records[name]) for name in records.dtype.names]
    return np.concatenate(parts, axis=1)


def _column_block(values: np.ndarray) -> np.ndarray:
    if values.dtype.names is not None:
        return np.concatenate([to_columns(column) for column in np.atleast_2d(values.T)], axis=1)
    return values.reshape(len(values), -1).astype(np.int64)


def from_columns(dtype: np.dtype, table: np.ndarray) -> np.ndarray:
    """n records from an integer array (n, columns); the inverse of `to_columns`."""
    records = np.zeros(len(table), dtype)
    _fill(records, table, 0)
    return records


def _fill(records: np.ndarray, table: np.ndarray, start: int) -> int:
    for name in records.dtype.names:
        target = records[name]
        if target.dtype.names is not None:
            for column in np.atleast_2d(target.T):
                start = _fill(column, table, start)
        elif target.ndim == 1:
            target[...] = table[:, start]
            start += 1
        else:
            target[...] = table[:, start : start + target.shape[1]]
            start += target.shape[1]
    return start


def to_record(dtype: np.dtype, values: Mapping[str, Any]) -> np.ndarray:
    """One record (shape ()) from a nested mapping; fields that are left out are 0.

    Raises KeyError for a field that the structure does not have, OverflowError for an integer that does not fit.
    """
    record = np.zeros((), dtype)
    _assign(record, values)
    return record


def _assign(record: np.ndarray, values: Mapping[str, Any]) -> None:
    for name, value in values.items():
        if name not in record.dtype.names:
            raise KeyError(f"no field {name!r} here, only {', '.join(record.dtype.names)}")
        if isinstance(value, Mapping):
            _assign(record[name], value)
        elif record.dtype[name].base.names is not None:
            for target, element in zip(record[name], value, strict=True):
                _assign(target, element)
        else:
            record[name] = value


def flip_bit(record: np.ndarray | np.void, column: str, bit: int) -> None:
    """Flip one bit of one integer of a record, in place; the integer is named as `columns` names it."""
    *parents, leaf = (int(part) if part.isdigit() else part for part in re.findall(r"\w+", column))
    for part in parents:
        record = record[part]
    value = np.asarray(record[leaf])
    unsigned = np.dtype(f"u{value.dtype.itemsize}")
    record[leaf] = (value.astype(unsigned) ^ unsigned.type(1 << bit)).astype(value.dtype)


def to_dict(record: np.void | np.ndarray) -> dict[str, Any]:
    """A nested dict of Python integers and tuples of them from one record."""
    return _unpacker(record.dtype)(record.item())


def to_tuple(dtype: np.dtype, values: Mapping[str, Any]) -> tuple:
    """What numpy takes for one record, from a nested dict that has every field."""
    return _packer(dtype)(values)


@cache
def _unpacker(dtype: np.dtype) -> Callable[[tuple], dict[str, Any]]:
    parts = [(name, _unpack_field(dtype[name])) for name in dtype.names]
    return lambda values: {name: unpack(value) for (name, unpack), value in zip(parts, values, strict=True)}


def _unpack_field(dtype: np.dtype) -> Callable[[Any], Any]:
    if dtype.names is not None:
        return _unpacker(dtype)
    if dtype.base.names is not None:
        unpack = _unpacker(dtype.base)
        return lambda elements: tuple(unpack(element) for element in elements.tolist())
    return (lambda value: tuple(value.tolist())) if dtype.subdtype else (lambda value: value)


@cache
def _packer(dtype: np.dtype) -> Callable[[Mapping[str, Any]], tuple]:
    parts = [(name, _pack_field(dtype[name])) for name in dtype.names]
    return lambda values: tuple(pack(values[name]) for name, pack in parts)


def _pack_field(dtype: np.dtype) -> Callable[[Any], Any]:
    if dtype.names is not None:
        return _packer(dtype)
    if dtype.base.names is not None:
        pack = _packer(dtype.base)
        return lambda elements: [pack(element) for element in elements]
    return lambda value: value
