"""From a file to a checked `Mission`, or to one `MissionError` that lists everything that is wrong."""

from __future__ import annotations

import hashlib
import json
import os
import re
import tomllib
from collections.abc import Mapping
from dataclasses import fields
from importlib import resources
from pathlib import Path

from pyharness.mission.checks import cross_check, inertia_matrix
from pyharness.mission.defaults import WINDING, complete
from pyharness.mission.errors import MissionError
from pyharness.mission.model import (
    AXES,
    Body,
    Coil,
    Control,
    CurrentSense,
    Cycle,
    Defence,
    Gyro,
    Magnetometer,
    Mission,
    Orbit,
    Supply,
    Winding,
)
from pyharness.mission.reading import read_tree
from pyharness.mission.wording import shown

Tree = Mapping[str, object]


def demo_path() -> Path:
    """The demo mission that ships with the package."""
    return mission_path("demo")


def mission_path(name: str) -> Path:
    """A mission that ships with the package, by its name: "demo" or "plover"."""
    return Path(str(resources.files("pyharness") / "missions" / f"{name}.toml"))


def load_mission(path: str | os.PathLike[str], overrides: Tree | None = None) -> Mission:
    """Read, merge, check and complete a mission file.

    `overrides` is a tree laid over that of the file before anything is checked: tables merge, everything else
    replaces, None deletes the key.

    Raises `MissionError` with every problem there is; no content of the file raises anything else.
    """
    source = os.fspath(path)
    raw = _read(source)
    tree = _parse(raw, source)
    if overrides:
        tree = _merged(tree, overrides)
    reading = read_tree(tree)
    complete(reading)
    problems = reading.problems + cross_check(reading)
    if problems:
        raise MissionError(source, problems)
    return _mission(reading.values, source, _digest(raw, overrides))


def _read(source: str) -> bytes:
    try:
        return Path(source).read_bytes()
    except OSError as error:
        raise MissionError(source, [f"cannot be read: {error.strerror}"], whole_file=True) from error
    except ValueError as error:  # a path with a zero in it
        raise MissionError(source, [f"cannot be read: {error}"], whole_file=True) from error


def _parse(raw: bytes, source: str) -> dict[str, object]:
    try:
        return tomllib.loads(raw.decode("utf-8"))
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        problem = f"is not UTF-8 text: byte 0x{raw[error.start]:02x} in line {line}"
    except RecursionError:
        problem = "is not a mission file: nested too deeply"
    except ValueError as error:  # TOMLDecodeError, and what int() has against very long numbers
        problem = f"is not valid TOML: {error}{_line_told(raw, str(error))}"
    raise MissionError(source, [problem], whole_file=True)


def _merged(base: object, over: Tree) -> dict[str, object]:
    merged = dict(base) if isinstance(base, Mapping) else {}
    for name, value in over.items():
        if value is None:
            merged.pop(name, None)
        elif isinstance(value, Mapping):
            merged[name] = _merged(merged.get(name), value)
        else:
            merged[name] = value
    return merged


def _digest(raw: bytes, overrides: Tree | None) -> str:
    """First 12 hex digits of SHA-256 over the file and, if there are any, the overrides as canonical JSON."""
    if overrides:
        raw += json.dumps(overrides, sort_keys=True, separators=(",", ":"), default=shown).encode()
    return hashlib.sha256(raw).hexdigest()[:12]


def _mission(values: dict[str, object], source: str, digest: str) -> Mission:
    return Mission(
        name=values["name"],
        body=_table(Body, values, "body", inertia_kg_m2=inertia_matrix(values)),
        orbit=_table(Orbit, values, "orbit"),
        supply=_table(Supply, values, "supply"),
        coil=tuple(_table(Coil, values, f"coil.{axis}", winding=_winding(values, axis)) for axis in AXES),
        magnetometer=_table(Magnetometer, values, "magnetometer"),
        gyro=_table(Gyro, values, "gyro") if values["gyro"] else None,
        cycle=_table(Cycle, values, "cycle"),
        control=_table(Control, values, "control"),
        defence=_table(Defence, values, "defence"),
        current_sense=_table(CurrentSense, values, "current_sense") if values["current_sense"] else None,
        source=source,
        digest=digest,
    )


def _table(table: type, values: dict[str, object], prefix: str, **made: object) -> object:
    """One of the model's classes from the values under a prefix; what only alternatives need is None."""
    read = {f.name: values.get(f"{prefix}.{f.name}") for f in fields(table)}
    return table(**(read | made))


def _winding(values: dict[str, object], axis: str) -> Winding | None:
    return _table(Winding, values, f"coil.{axis}") if f"coil.{axis}.{WINDING[0]}" in values else None


def _line_told(raw: bytes, message: str) -> str:
    """The line that a message of tomllib is about, if it names one."""
    found = re.search(r"at line (\d+)", message)
    lines = raw.decode("utf-8").splitlines()
    number = int(found[1]) if found else 0
    return f": {shown(lines[number - 1].strip())}" if 0 < number <= len(lines) else ""
