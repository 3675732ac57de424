"""Tell two sets of vectors apart, in physical units."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from pyharness.flight import Interface
from pyharness.flight.records import columns, to_columns
from pyharness.scaling import Config
from pyharness.vectors.check import stage_of
from pyharness.vectors.digests import read_digest, tell_digests_apart
from pyharness.vectors.files import VectorFile, find_vectors, read_vector


def tell_folders_apart(a: Path, b: Path, interface: Interface) -> list[str]:
    """What differs between two folders, a line or more for each file; empty if nothing does. Raises VectorError."""
    files_a = {f"{p.parent.name}/{p.stem}": p for p in find_vectors(a)}
    files_b = {f"{p.parent.name}/{p.stem}": p for p in find_vectors(b)}
    told = [f"{name}: only in {a}" for name in files_a if name not in files_b]
    told += [f"{name}: only in {b}" for name in files_b if name not in files_a]
    for name in sorted(files_a.keys() & files_b.keys()):
        if files_a[name].read_bytes() != files_b[name].read_bytes():
            differences = tell_apart(read_vector(files_a[name], interface), read_vector(files_b[name], interface))
            told += [f"{name}: {line}" for line in differences]
    return told + _tell_digests_apart(a, b)


def _tell_digests_apart(a: Path, b: Path) -> list[str]:
    """What differs between the long flights, which are there as hashes only."""
    names = sorted({path.name for folder in (a, b) for path in (folder / "digests").glob("*.json")})
    told = []
    for name in names:
        ours, theirs = a / "digests" / name, b / "digests" / name
        if not (ours.is_file() and theirs.is_file()):
            told.append(f"digests/{name}: only in {a if ours.is_file() else b}")
        elif ours.read_bytes() != theirs.read_bytes():
            told.append(f"digests/{name}: {tell_digests_apart(read_digest(ours), read_digest(theirs))}")
    return told


def tell_apart(a: VectorFile, b: VectorFile) -> list[str]:
    """What differs between two files that are not the same, a line for each thing."""
    told = [f"configuration: {line}" for line in _config_lines(a.config, b.config)]
    if len(a.inputs) != len(b.inputs):
        return [*told, f"{len(a.inputs)} rows against {len(b.inputs)}"]
    names = [f"inputs.{c}" for c in columns(a.inputs.dtype)] + [f"outputs.{c}" for c in columns(a.outputs.dtype)]
    table_a = np.concatenate([to_columns(a.inputs), to_columns(a.outputs)], axis=1)
    table_b = np.concatenate([to_columns(b.inputs), to_columns(b.outputs)], axis=1)
    values_a, values_b = _physical(a, names, table_a), _physical(b, names, table_b)
    by_group: dict[str, list[int]] = {}
    for i, name in enumerate(names):
        if (table_a[:, i] != table_b[:, i]).any():
            by_group.setdefault(_group(name), []).append(i)
    for group, indices in by_group.items():
        rows = (table_a[:, indices] != table_b[:, indices]).any(axis=1)
        worst = max(indices, key=lambda i: np.abs(values_a[:, i] - values_b[:, i]).max())
        row = int(np.abs(values_a[:, worst] - values_b[:, worst]).argmax())
        size = a.sizes.get(names[worst])
        told.append(
            f"{group}: {int(rows.sum())} of {len(rows)} rows, first {int(np.flatnonzero(rows)[0])}; most in {names[worst]}, "
            f"row {row}: {values_a[row, worst]:.6g} against {values_b[row, worst]:.6g}{' ' + size.unit if size else ''}"
        )
    return told or ["the header only"]


def _group(name: str) -> str:
    return "inputs" if name.startswith("inputs.") else stage_of(name)


def _physical(vector: VectorFile, names: list[str], table: np.ndarray) -> np.ndarray:
    steps = [vector.sizes[name].step if name in vector.sizes else 1.0 for name in names]
    return table * np.array(steps)


def _config_lines(a: Config, b: Config, prefix: str = "") -> list[str]:
    told = []
    for key in a.keys() | b.keys():
        left, right = a.get(key), b.get(key)
        if isinstance(left, dict) and isinstance(right, dict):
            told += _config_lines(left, right, f"{prefix}{key}.")
        elif left != right and key != "digest":
            told.append(f"{prefix}{key}: {_shown(left)} against {_shown(right)}")
    return sorted(told)


def _shown(value: object) -> str:
    return " ".join(map(str, value)) if isinstance(value, tuple) else str(value)
