"""Reads a tree of values against the schema, and collects every problem on the way."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime

from pyharness.mission.schema import BY_PATH, OPTIONAL_TABLES, Depends, Key
from pyharness.mission.wording import dotted, quantity, shown

Node = dict[str, "Key | Node"]


@dataclass
class Reading:
    """What a file says, as far as it could be understood.

    `values` holds the legal values and fixed defaults by path, and for an optional table whether it is there;
    `given` the paths of all known keys in the file, legal or not; `broken` the tables that are not tables.
    """

    values: dict[str, object] = field(default_factory=dict)
    given: set[str] = field(default_factory=set)
    broken: set[str] = field(default_factory=set)
    problems: list[str] = field(default_factory=list)

    def has(self, *paths: str) -> bool:
        """Whether all of these have a legal value."""
        return all(path in self.values for path in paths)

    def is_broken(self, table: str) -> bool:
        """Whether this table, or one that it lies in, could not be read."""
        return any(f"{table}.".startswith(f"{broken}.") for broken in self.broken)

    def missing(self, path: str, hint: str = "") -> None:
        """Note a key that should be there."""
        self.problems.append(f"{path}: missing, must be {BY_PATH[path].expected()}{hint}")


def read_tree(tree: Mapping[str, object]) -> Reading:
    """Types, ranges, unknown and missing keys of a whole file. The tree is that of `tomllib`."""
    reading = Reading()
    _read_table(reading, _SCHEMA_TREE, tree, "")
    return reading


def _nested() -> Node:
    root: Node = {}
    for path, key in BY_PATH.items():
        *tables, name = path.split(".")
        node = root
        for table in tables:
            node = node.setdefault(table, {})
        node[name] = key
    return root


_SCHEMA_TREE = _nested()


def _read_table(reading: Reading, node: Node, table: Mapping[str, object], prefix: str) -> None:
    for name, entry in node.items():
        path = dotted(prefix, name)
        if isinstance(entry, Key):
            _read_key(reading, entry, table)
            continue
        inner = table.get(name, {})
        if path in OPTIONAL_TABLES:
            reading.values[path] = name in table
            if name not in table:
                continue
        if isinstance(inner, Mapping):
            _read_table(reading, entry, inner, path)
        else:
            reading.broken.add(path)
            keys = ", ".join(entry)
            reading.problems.append(f"{path}: {shown(inner)}, must be a table with the keys {keys}")
    for name in table:
        if name not in node:
            reading.problems.append(f"{dotted(prefix, str(name))}: unknown key{_nearest(str(name), node)}")


def _nearest(name: str, node: Node) -> str:
    """The known key most like this one: in the same table if there is one, else anywhere."""
    if near := difflib.get_close_matches(name, node, n=1):
        return f", the nearest known key here is {near[0]}"
    elsewhere = {key.name: path for path, key in BY_PATH.items()}
    if near := difflib.get_close_matches(name, elsewhere, n=1, cutoff=0.8):
        return f", the nearest known key is {elsewhere[near[0]]}"
    return ""


def _read_key(reading: Reading, key: Key, table: Mapping[str, object]) -> None:
    if key.name in table:
        reading.given.add(key.path)
        problems: list[str] = []
        value = _checked(key, key.path, table[key.name], key.shape, problems)
        if problems:
            reading.problems += problems
        else:
            reading.values[key.path] = value
    elif key.required:
        reading.missing(key.path)
    elif not isinstance(key.default, Depends):
        reading.values[key.path] = key.default


def _checked(key: Key, path: str, value: object, shape: tuple[int, ...], problems: list[str]) -> object:
    """The value in the model's types: arrays as nested tuples, numbers as float, times in UTC."""
    if shape:
        if not isinstance(value, (list, tuple)) or len(value) != shape[0]:
            problems.append(f"{path}: {shown(value)}, must be {key.expected(shape)}")
            return None
        return tuple(_checked(key, f"{path}[{i}]", item, shape[1:], problems) for i, item in enumerate(value))
    if (fault := _type_fault(key, value)) is not None:
        problems.append(f"{path}: {shown(value)}{fault}, must be {key.expected(())}")
        return None
    measured = len(value) if key.kind == "text" and not key.choices else value
    if (key.choices and value not in key.choices) or (key.limits and measured not in key.limits):
        problems.append(f"{path}: {quantity(measured, key.unit)}, must be {key.legal}")
        return None
    if key.kind == "number":
        return float(value)
    return value.astimezone(UTC) if key.kind == "time" else value


_TYPE_NAMES = {bool: " (a flag)", int: " (an integer)", float: " (a float)", str: " (a text)"}


def _type_fault(key: Key, value: object) -> str | None:
    """What is wrong with the type of a single value, to follow it in a message; None if nothing is."""
    is_integer = isinstance(value, int) and not isinstance(value, bool)
    right = {
        "number": is_integer or isinstance(value, float),
        "integer": is_integer,
        "text": isinstance(value, str),
        "flag": isinstance(value, bool),
        "time": isinstance(value, datetime),
    }[key.kind]
    if not right:
        return _TYPE_NAMES.get(type(value), "")
    if key.kind == "time" and value.utcoffset() is None:
        return " (no offset from UTC: end it with Z)"
    if key.kind == "text" and not value.isprintable():
        return " (unprintable characters)"
    return None
