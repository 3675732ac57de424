"""Whatever is in the file, loading gives a mission or a MissionError: never anything else."""

from __future__ import annotations

import copy
import tomllib
from datetime import UTC, date, datetime, time, timedelta, timezone
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pyharness.mission import Mission, MissionError, load_mission
from pyharness.mission.schema import BY_PATH

BASE = Path(__file__).with_name("base.toml")
RAW = BASE.read_bytes()
BASE_TREE = tomllib.loads(RAW.decode())
QUICK = settings(
    max_examples=300,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)


def positions(tree: object, path: tuple[object, ...] = ()) -> list[tuple[object, ...]]:
    """Paths of everything in the tree: tables, keys, and elements of arrays."""
    found = [path] if path else []
    items = tree.items() if isinstance(tree, dict) else enumerate(tree) if isinstance(tree, list) else ()
    for name, inner in items:
        found += positions(inner, (*path, name))
    return found


POSITIONS = positions(BASE_TREE)
DEFENCES = [("defence", path.partition(".")[2]) for path in BY_PATH if path.startswith("defence.")]
KEYS_IN_TABLES = [position for position in POSITIONS if len(position) == 2] + DEFENCES
ENDS = [
    value
    for key in BY_PATH.values()
    for value in (*key.choices, *((key.limits.low, key.limits.high) if key.limits else ()))
]
PATCHES = [b"[", b"=", b'"', b"\n", b"0", b"-", b"e9", b" = { }"]
ZONES = st.sampled_from([UTC, timezone(timedelta(hours=14)), timezone(timedelta(hours=-12)), None])
SCALARS = st.one_of(
    st.sampled_from(ENDS),
    st.floats(),
    st.integers(),
    st.integers(1, 1000),
    st.just(1 << 4000),
    st.booleans(),
    st.text(max_size=80),
    st.datetimes(timezones=ZONES),
    st.sampled_from([datetime.min, datetime.max, date(2027, 3, 14), time(9, 30)]),
)
VALUES = st.recursive(
    SCALARS,
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(max_size=5), inner, max_size=3),
    max_leaves=8,
)
CHANGES = st.tuples(
    st.sampled_from(["delete", "replace", "replace", "rename"]), st.sampled_from(POSITIONS), VALUES, st.text()
)


def apply(tree: dict[str, object], change: tuple[str, tuple[object, ...], object, str]) -> None:
    """Delete, replace or rename what is at a position, if an earlier change has left it there."""
    action, (*tables, last), value, name = change
    node = tree
    try:
        for table in tables:
            node = node[table]
        old = node[last]
        if action == "replace":
            node[last] = value
        else:
            del node[last]
        if action == "rename" and isinstance(node, dict):
            node[name] = old
    except (KeyError, IndexError, TypeError):
        return


def load(path, overrides=None) -> Mission | MissionError:
    try:
        return load_mission(path, overrides)
    except MissionError as error:
        return error


def check(result: Mission | MissionError) -> None:
    if isinstance(result, MissionError):
        assert result.problems
        told = str(result).splitlines()
        whole_file = len(told) == 1 and told[0].startswith(f"{result.source}: ")
        assert whole_file or len(told) == 1 + len(result.problems), "one line each"
    else:
        cycle = result.cycle
        used = cycle.blanking_ms + cycle.sample_ms + cycle.compute_delay_ms + cycle.drive_window_ms
        assert used <= cycle.period_ms + 1e-6
        assert all(0 < coil.dipole_a_m2 <= 50 for coil in result.coil)
        assert 0 < result.control.field_min_ut < result.control.field_max_ut


@pytest.fixture(scope="module")
def empty(tmp_path_factory):
    path = tmp_path_factory.mktemp("mission") / "empty.toml"
    path.write_bytes(b"")
    return path


@QUICK
@given(st.lists(CHANGES, min_size=1, max_size=6))
def test_changed_trees(empty, changes):
    tree = copy.deepcopy(BASE_TREE)
    for change in changes:
        apply(tree, change)
    check(load(empty, tree))


@QUICK
@given(st.dictionaries(st.sampled_from(KEYS_IN_TABLES), st.sampled_from(ENDS), max_size=40))
def test_ends_of_ranges_everywhere(empty, replaced):
    tree = copy.deepcopy(BASE_TREE)
    for (table, name), value in replaced.items():
        tree.setdefault(table, {})[name] = value
    check(load(empty, tree))


@QUICK
@given(st.integers(0, len(RAW)), st.integers(0, 40), st.binary(max_size=12) | st.sampled_from(PATCHES))
def test_changed_bytes(tmp_path, start, length, patch):
    path = tmp_path / "changed.toml"
    path.write_bytes(RAW[:start] + patch + RAW[start + length :])
    check(load(path))
