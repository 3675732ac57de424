"""Vector files: a JSON header in comment lines, a row of column names, and rows of decimal integers.

The header names what the file exercises and carries the whole integer configuration, so that a replay needs nothing else. The
format is closed: `HEADER_KEYS` are all the keys there are; vectors/schema.json says the same for other tools.
"""

from __future__ import annotations

import io
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from pyharness.flight import Interface
from pyharness.flight.records import columns, from_columns, to_columns
from pyharness.scaling import Config, Scaling, Size

FORMAT = "slackwater vector 1"
HEADER_KEYS = ("format", "name", "tier", "purpose", "seed", "overrides", "command", "rows", "config_digest", "config", "sizes")
TIERS = ("unit", "loop")


class VectorError(Exception):
    """A vector file, or a folder of them, that cannot be used."""


class NoVectors(VectorError):
    """There is nothing to check, which is a failure."""


@dataclass(frozen=True)
class VectorFile:
    """One file: header, inputs and the outputs of the exact model, (rows,) records each."""

    name: str
    tier: str
    purpose: str
    seed: int
    overrides: dict[str, Any]
    command: str
    config: Config
    sizes: dict[str, Size]
    inputs: np.ndarray
    outputs: np.ndarray

    @property
    def label(self) -> str:
        """tier/name, as people and messages call it."""
        return f"{self.tier}/{self.name}"


def sizes_of(scaling: Scaling, interface: Interface) -> dict[str, Size]:
    """The physical size of every column that has one, to six digits: it goes into files that must be the same everywhere."""
    names = [f"inputs.{c}" for c in columns(interface.inputs)] + [f"outputs.{c}" for c in columns(interface.outputs)]
    found = {name: scaling.size_of(name.partition(".")[2]) for name in names}
    return {name: Size(float(f"{size.step:.6g}"), size.unit) for name, size in found.items() if size}


def to_text(vector: VectorFile) -> str:
    """The file's content; the same for the same vector, byte for byte."""
    header = {
        "format": FORMAT,
        "name": vector.name,
        "tier": vector.tier,
        "purpose": vector.purpose,
        "seed": vector.seed,
        "overrides": vector.overrides,
        "command": vector.command,
        "rows": len(vector.inputs),
        "config_digest": f"{vector.config['digest']:08x}",
        "config": vector.config,
        "sizes": {name: [size.step, size.unit] for name, size in vector.sizes.items()},
    }
    lines = [f"# {line}" for line in _dump(header).splitlines()]
    table = np.concatenate([to_columns(vector.inputs), to_columns(vector.outputs)], axis=1)
    names = [f"inputs.{c}" for c in columns(vector.inputs.dtype)] + [f"outputs.{c}" for c in columns(vector.outputs.dtype)]
    rows = [",".join(map(str, row)) for row in table.tolist()]
    return "\n".join([*lines, ",".join(names), *rows, ""])


def _dump(header: dict[str, Any]) -> str:
    """JSON with one line for each key, and one for each entry of the larger tables."""
    parts = []
    for key, value in header.items():
        if key in ("config", "sizes"):
            inner = ",\n".join(f"    {json.dumps(k)}: {json.dumps(v, ensure_ascii=False)}" for k, v in value.items())
            parts.append(f"  {json.dumps(key)}: {{\n{inner}\n  }}")
        else:
            parts.append(f"  {json.dumps(key)}: {json.dumps(value, ensure_ascii=False)}")
    return "{\n" + ",\n".join(parts) + "\n}"


def read_vector(path: Path, interface: Interface) -> VectorFile:
    """Read one file. Raises VectorError that names the file, and the line or key, for anything that is not as it should be."""
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise VectorError(f"{path}: cannot be read: {error}") from None
    lines = text.splitlines()
    count = next((i for i, line in enumerate(lines) if not line.startswith("#")), len(lines))
    header = _header(path, lines[:count])
    if problem := _config_problem(header["config"], interface.config, "config"):
        raise VectorError(f"{path}: {problem}")
    names = [f"inputs.{c}" for c in columns(interface.inputs)] + [f"outputs.{c}" for c in columns(interface.outputs)]
    if count == len(lines) or lines[count].split(",") != names:
        raise VectorError(f"{path}, line {count + 1}: the column names are not those of this mrd.h; write the vectors anew")
    table = _table(path, lines[count + 1 :], count + 2, len(names))
    if len(table) != header["rows"]:
        raise VectorError(f"{path}: rows: {len(table)}, the header says {header['rows']}")
    split = len(columns(interface.inputs))
    return VectorFile(
        name=header["name"], tier=header["tier"], purpose=header["purpose"], seed=header["seed"],
        overrides=header["overrides"], command=header["command"], config=_tuples(header["config"]),
        sizes={name: Size(*size) for name, size in header["sizes"].items()},
        inputs=_records(path, interface.inputs, table[:, :split], names, 0, count + 2),
        outputs=_records(path, interface.outputs, table[:, split:], names, split, count + 2),
    )  # fmt: skip


def _header(path: Path, lines: list[str]) -> dict[str, Any]:
    try:
        header = json.loads("\n".join(line.removeprefix("#") for line in lines))
    except json.JSONDecodeError as error:
        raise VectorError(f"{path}, line {error.lineno}: the header is not JSON: {error.msg}") from None
    except (RecursionError, ValueError) as error:  # nested too deeply, or an integer of thousands of digits
        raise VectorError(f"{path}: the header cannot be read: {error}") from None
    if not isinstance(header, dict):
        raise VectorError(f"{path}, line 1: the header must be a JSON object")
    if header.get("format") != FORMAT:
        raise VectorError(f"{path}: format: {header.get('format')!r}, must be {FORMAT!r}")
    if missing := [key for key in HEADER_KEYS if key not in header]:
        raise VectorError(f"{path}: the header lacks {', '.join(missing)}")
    if unknown := [key for key in header if key not in HEADER_KEYS]:
        raise VectorError(f"{path}: the header has unknown keys: {', '.join(unknown)}")
    kinds = {"rows": int, "seed": int, "config": dict, "sizes": dict, "overrides": dict}
    for key in HEADER_KEYS:
        kind = kinds.get(key, str)
        if not isinstance(header[key], kind) or isinstance(header[key], bool):
            raise VectorError(f"{path}: {key}: must be a JSON {_JSON_NAMES[kind]}")
    if header["tier"] not in TIERS:
        raise VectorError(f"{path}: tier: {header['tier']!r}, must be {' or '.join(TIERS)}")
    for name, size in header["sizes"].items():
        if not (isinstance(size, list) and len(size) == 2 and isinstance(size[0], (int, float)) and isinstance(size[1], str)):
            raise VectorError(f"{path}: sizes: {name}: must be [number, unit]")
    return header


_JSON_NAMES = {int: "integer", dict: "object", str: "string"}


def _table(path: Path, lines: list[str], first_line: int, width: int) -> np.ndarray:
    if not lines:
        return np.zeros((0, width), np.int64)
    try:
        return np.loadtxt(io.StringIO("\n".join(lines)), dtype=np.int64, delimiter=",", ndmin=2, comments=None)
    except (ValueError, OverflowError):
        pass
    for number, line in enumerate(lines, first_line):  # the slow way, to name the place
        cells = line.split(",")
        if len(cells) != width:
            raise VectorError(f"{path}, line {number}: {len(cells)} cells, must be {width}")
        for column, cell in enumerate(cells, 1):
            if not cell.strip().removeprefix("-").isdecimal() or len(cell) > 18:
                raise VectorError(f"{path}, line {number}, cell {column}: {cell[:30]!r} is not an integer")
    raise VectorError(f"{path}: the rows cannot be read")


def _records(path: Path, dtype: np.dtype, table: np.ndarray, names: list[str], start: int, first_line: int) -> np.ndarray:
    records = from_columns(dtype, table)
    wrong = to_columns(records) != table
    if wrong.any():
        row, column = np.argwhere(wrong)[0]
        raise VectorError(
            f"{path}, line {first_line + row}: {names[start + column]}: {table[row, column]} does not fit the field of mrd.h"
        )
    return records


def _config_problem(value: Any, dtype: np.dtype, key: str) -> str | None:
    """The first place where a configuration is not one of mrd.h, in words; None if there is none."""
    if dtype.subdtype:
        if not isinstance(value, list) or len(value) != dtype.shape[0]:
            return f"{key}: must be a JSON array of {dtype.shape[0]}"
        parts = [(item, dtype.base, f"{key}[{i}]") for i, item in enumerate(value)]
    elif dtype.names is None:
        low, high = int(np.iinfo(dtype).min), int(np.iinfo(dtype).max)
        legal = isinstance(value, int) and not isinstance(value, bool) and low <= value <= high
        return None if legal else f"{key}: must be an integer in [{low}, {high}]"
    else:
        if not isinstance(value, dict) or set(value) != set(dtype.names):
            return f"{key}: must be a JSON object of {', '.join(dtype.names)}"
        parts = [(value[name], dtype[name], f"{key}.{name}") for name in dtype.names]
    return next((problem for part in parts if (problem := _config_problem(*part))), None)


def _tuples(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _tuples(item) for key, item in value.items()}
    return tuple(value) if isinstance(value, list) else value


def find_vectors(folder: Path) -> list[Path]:
    """The vector files of a folder, by tier and name. Raises NoVectors if there is none: nothing checked is a failure."""
    paths = [path for tier in TIERS for path in sorted((folder / tier).glob("*.csv"))]
    if not paths:
        raise NoVectors(
            f"{folder}: no vectors here (expected unit/*.csv and loop/*.csv); write them with: slackwater vectors write --out {folder}"
        )
    return paths
