"""Vector files: what is written is read back, and what is broken is told with its place."""

from __future__ import annotations

import json
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pyharness.controllers import load_controller
from pyharness.flight import Interface, find_sources
from pyharness.flight.records import columns, to_columns
from pyharness.vectors import (
    NoVectors,
    VectorError,
    check_vector,
    find_vectors,
    read_vector,
    tell_folders_apart,
    to_text,
)
from pyharness.vectors.files import HEADER_KEYS

FOLDER = Path(__file__).parents[2] / "vectors"
INTERFACE = Interface(find_sources())
PATHS = find_vectors(FOLDER)
SMALL = FOLDER / "unit" / "gate.csv"


@pytest.fixture(scope="module")
def c():
    return load_controller("c")


@pytest.mark.parametrize("path", PATHS, ids=lambda p: f"{p.parent.name}/{p.stem}")
def test_committed_files_replay_and_round_trip(path, c):
    vector = read_vector(path, INTERFACE)
    assert vector.label == f"{path.parent.name}/{path.stem}"
    assert to_text(vector) == path.read_text(encoding="utf-8")
    verdict = check_vector(vector, c)
    assert verdict.passed, verdict.detail
    assert verdict.rows == len(vector.inputs) > 0


def test_the_folder_is_small_enough_to_review():
    assert sum(path.stat().st_size for path in FOLDER.rglob("*") if path.is_file()) < 10e6


def test_the_header_is_what_the_schema_says():
    """vectors/schema.json is written for other tools; it names the keys that the reader insists on, and no others."""
    schema = json.loads((FOLDER / "schema.json").read_text())
    assert schema["additionalProperties"] is False
    assert sorted(schema["required"]) == sorted(schema["properties"]) == sorted(HEADER_KEYS)
    kinds = {"string": str, "integer": int, "object": dict}
    for path in PATHS:
        lines = [line[2:] for line in path.read_text().splitlines() if line.startswith("#")]
        header = json.loads("\n".join(lines))
        for key, rule in schema["properties"].items():
            assert isinstance(header[key], kinds[rule["type"]]), (path, key)
            assert "enum" not in rule or header[key] in rule["enum"]
            assert "pattern" not in rule or re.fullmatch(rule["pattern"], header[key])


def test_every_bit_of_every_expected_column_matters(c):
    """Promise 3 has teeth: one flipped bit anywhere in the expected columns fails the replay, naming row and column."""
    vector = read_vector(FOLDER / "loop" / "commands.csv", INTERFACE)
    vector = replace(vector, inputs=vector.inputs[:60], outputs=vector.outputs[:60])
    assert check_vector(vector, c).passed
    names = [f"outputs.{name}" for name in columns(INTERFACE.outputs)]
    flat = np.frombuffer(vector.outputs.tobytes(), np.uint8).reshape(60, -1)
    used = used_bytes(INTERFACE.outputs)
    for number, offset in enumerate(used):
        row = (7 * number) % 60
        for bit in range(8):
            flipped = flat.copy()
            flipped[row, offset] ^= 1 << bit
            outputs = np.frombuffer(flipped.tobytes(), INTERFACE.outputs)
            detail = check_vector(replace(vector, outputs=outputs), c)
            changed = np.argwhere(to_columns(outputs) != to_columns(vector.outputs))
            assert len(changed) == 1 and changed[0][0] == row
            assert not detail.passed
            assert detail.detail.startswith(f"row {row}, stage ") and f": {names[changed[0][1]]} is " in detail.detail


def used_bytes(dtype: np.dtype, base: int = 0) -> list[int]:
    """Offsets of the bytes that hold integers, padding left out."""
    if dtype.names is None:
        return list(range(base, base + dtype.itemsize))
    return [offset for name in dtype.names for offset in used_bytes(dtype[name], base + dtype.fields[name][1])]


def test_differences_are_told_in_counts_and_units(c):
    vector = read_vector(FOLDER / "loop" / "nominal.csv", INTERFACE)
    outputs = vector.outputs.copy()
    outputs["trace"]["derivative"]["derivative"][100, 1] += 50
    outputs["status"][20] ^= 1
    detail = check_vector(replace(vector, outputs=outputs), c).detail
    assert re.match(r"row 20, stage status word: outputs\.status is \d+, expected \d+; 2 of 1500 rows differ$", detail)
    outputs["status"][20] ^= 1
    detail = check_vector(replace(vector, outputs=outputs), c).detail
    assert re.match(r"row 100, stage derivative: outputs\.trace\.derivative\.derivative\[1\] is (-?\d+), expected (-?\d+) "
                    r"\(\S+ against \S+ nT/s\); 1 of 1500 rows differ$", detail)  # fmt: skip


def edited(tmp_path: Path, old: str, new: str, count: int = 1) -> Path:
    text = SMALL.read_text(encoding="utf-8")
    assert old in text
    path = tmp_path / "edited.csv"
    path.write_text(text.replace(old, new, count), encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ('"format": "slackwater vector 1"', '"format": "other"', "format: 'other', must be 'slackwater vector 1'"),
        ('"seed": 0,', '"seed": "0",', "seed: must be a JSON integer"),
        ('"seed": 0,', '"seed": 0, "extra": 1,', "the header has unknown keys: extra"),
        ('"tier": "unit"', '"tier": "bench"', "tier: 'bench', must be unit or loop"),
        ('"seed": 0,', "", "the header lacks seed"),
        ('"rows": 54', '"rows": 55', "rows: 54, the header says 55"),
        (",outputs.ticks[0]", ",outputs.ticks[9]", "the column names are not those of this mrd.h"),
        ('"purpose":', '"purpose"', "the header is not JSON"),
    ],
)
def test_broken_headers_are_told(tmp_path, old, new, message):
    with pytest.raises(VectorError, match=re.escape(message)):
        read_vector(edited(tmp_path, old, new), INTERFACE)


def test_broken_rows_are_told_with_line_and_cell(tmp_path):
    lines = SMALL.read_text(encoding="utf-8").splitlines()
    row = next(i for i, line in enumerate(lines) if not line.startswith("#")) + 3
    cells = lines[row].split(",")
    path = tmp_path / "rows.csv"
    for new, message in (
        ([*cells[:4], "x1", *cells[5:]], f"line {row + 1}, cell 5: 'x1' is not an integer"),
        (cells[:-1], f"line {row + 1}: {len(cells) - 1} cells, must be {len(cells)}"),
        (["-1", *cells[1:]], f"line {row + 1}: inputs.path.cycle_start_us: -1 does not fit the field of mrd.h"),
        (["1.5", *cells[1:]], f"line {row + 1}, cell 1: '1.5' is not an integer"),
        (["9" * 30, *cells[1:]], f"line {row + 1}, cell 1: '{'9' * 30}' is not an integer"),
    ):
        path.write_text("\n".join([*lines[:row], ",".join(new), *lines[row + 1 :], ""]), encoding="utf-8")
        with pytest.raises(VectorError, match=re.escape(message)):
            read_vector(path, INTERFACE)


@given(st.data())
@settings(max_examples=150)
def test_any_damage_is_read_or_told(tmp_path_factory, data):
    """Bytes cut out, doubled or changed: a vector, or a VectorError; nothing else."""
    raw = SMALL.read_bytes()
    start = data.draw(st.integers(0, len(raw) - 1))
    end = data.draw(st.integers(start, min(len(raw), start + 400)))
    middle = data.draw(st.sampled_from([b"", raw[start:end] * 2, b"\xff\xfe", b"{", b"\n", b",", b"null", b"[]", b'"', b"-"]))
    path = tmp_path_factory.mktemp("damage") / "damaged.csv"
    path.write_bytes(raw[:start] + middle + raw[end:])
    try:
        read_vector(path, INTERFACE)
    except VectorError as error:
        assert str(path) in str(error)


def test_nothing_to_check_is_a_failure(tmp_path):
    with pytest.raises(NoVectors, match="no vectors here .* write them with: slackwater vectors write --out"):
        find_vectors(tmp_path)


def test_two_sets_are_told_apart_in_units(tmp_path):
    for name in ("a", "b"):
        (tmp_path / name / "unit").mkdir(parents=True)
        (tmp_path / name / "unit" / "gate.csv").write_text(SMALL.read_text(encoding="utf-8"), encoding="utf-8")
    a, b = tmp_path / "a", tmp_path / "b"
    assert tell_folders_apart(a, b, INTERFACE) == []
    vector = read_vector(SMALL, INTERFACE)
    outputs = vector.outputs.copy()
    outputs["trace"]["gate"]["age_us"][5, 0] += 2000
    config = {**vector.config, "path": {**vector.config["path"], "shortest_ticks": 9}}
    (b / "unit" / "gate.csv").write_text(to_text(replace(vector, outputs=outputs, config=config)), encoding="utf-8")
    (b / "unit" / "more.csv").write_text(SMALL.read_text(encoding="utf-8"), encoding="utf-8")
    told = tell_folders_apart(a, b, INTERFACE)
    assert told[0] == f"unit/more: only in {b}"
    assert told[1] == "unit/gate: configuration: path.shortest_ticks: 8 against 9"
    assert re.match(r"unit/gate: gate: 1 of 54 rows, first 5; most in outputs\.trace\.gate\.age_us\[0\], row 5: \S+ against \S+ ms", told[2])
