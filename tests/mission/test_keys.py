"""Every key by itself, driven from the schema: both sides of each end of its range, its type, its absence."""

from __future__ import annotations

import math
from datetime import datetime, timedelta

import pytest

from pyharness.mission.reading import read_tree
from pyharness.mission.schema import BY_PATH, KEYS, Key

LIMITED = [path for path, key in BY_PATH.items() if key.limits]
CHOSEN = [path for path, key in BY_PATH.items() if key.choices]
SHAPED = [path for path, key in BY_PATH.items() if key.shape]


def put(tree: dict[str, object], path: str, value: object) -> None:
    *tables, name = path.split(".")
    for table in tables:
        tree = tree.setdefault(table, {})
    tree[name] = value


def remove(tree: dict[str, object], path: str) -> None:
    *tables, name = path.split(".")
    for table in tables:
        tree = tree.get(table, {})
    tree.pop(name, None)


def filled(key: Key, scalar: object) -> tuple[object, str]:
    """A value of the key's shape with this one as its last element, and that element's index."""
    legal = 1.0
    if key.shape == (3,):
        return [legal, legal, scalar], "[2]"
    if key.shape == (3, 3):
        return [[legal] * 3, [legal] * 3, [legal, legal, scalar]], "[2][2]"
    return scalar, ""


def beside(key: Key, end: object, outwards: int) -> object:
    """The nearest value on one side of an end of the range."""
    if isinstance(end, datetime):
        return end + outwards * timedelta(microseconds=1)
    if key.kind == "number":
        return math.nextafter(float(end), outwards * math.inf)
    return end + outwards


@pytest.mark.parametrize("side", ["low", "high"])
@pytest.mark.parametrize("path", LIMITED)
def test_both_sides_of_each_end(base_tree, path, side):
    key = BY_PATH[path]
    outwards = -1 if side == "low" else 1
    end = getattr(key.limits, side)
    if getattr(key.limits, f"{side}_open"):
        inside, outside = beside(key, end, -outwards), end
    else:
        inside, outside = end, beside(key, end, outwards)
    if key.kind == "text":
        inside, outside = "x" * inside, "x" * outside

    value, _ = filled(key, inside)
    put(base_tree, path, value)
    assert read_tree(base_tree).problems == []

    value, index = filled(key, outside)
    put(base_tree, path, value)
    (problem,) = read_tree(base_tree).problems
    assert problem.startswith(f"{path}{index}: ")
    assert problem.endswith(f"must be in {key.limits}")
    assert key.unit in problem


@pytest.mark.parametrize("path", CHOSEN)
def test_choices_and_nothing_else(base_tree, path):
    key = BY_PATH[path]
    for choice in key.choices:
        put(base_tree, path, choice)
        assert read_tree(base_tree).problems == []
    for other in ("iron", "") if key.kind == "text" else (0, 2, -2):
        put(base_tree, path, other)
        (problem,) = read_tree(base_tree).problems
        assert problem.startswith(f"{path}: ")
        assert all(str(choice) in problem for choice in key.choices)


@pytest.mark.parametrize("path", BY_PATH)
def test_wrong_types(base_tree, path):
    key = BY_PATH[path]
    wrong = {
        "number": ["1", True, {}, datetime(2027, 1, 1)],
        "integer": [1.0, "1", False, []],
        "text": [1, True, {}],
        "flag": [0, "true", 1.0],
        "time": ["2027-03-14T09:30:00Z", 2027, datetime(2027, 3, 14)],
    }[key.kind]
    for scalar in wrong:
        value, index = (["1", scalar], "[1]") if key.shape == (2,) else filled(key, scalar)
        put(base_tree, path, value)
        (problem,) = read_tree(base_tree).problems
        assert problem.startswith(f"{path}{index}: ")
        assert f", must be {key.expected(())}" in problem


@pytest.mark.parametrize("path", SHAPED)
def test_wrong_shapes(base_tree, path):
    key = BY_PATH[path]
    for value in (1.0, [], [1.0] * (key.shape[0] - 1), [1.0] * (key.shape[0] + 1)):
        put(base_tree, path, value)
        (problem,) = read_tree(base_tree).problems
        assert problem.startswith(f"{path}: ")
        size = " × ".join(map(str, key.shape))
        legal = f"numbers, each in {key.limits} {key.unit}" if key.limits else "texts"
        assert problem.endswith(f"must be {size} {legal}")


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
@pytest.mark.parametrize("path", [path for path in LIMITED if BY_PATH[path].kind == "number"])
def test_numbers_are_finite(base_tree, path, value):
    filling, index = filled(BY_PATH[path], value)
    put(base_tree, path, filling)
    (problem,) = read_tree(base_tree).problems
    assert problem.startswith(f"{path}{index}: {value} ".rstrip())


@pytest.mark.parametrize("path", BY_PATH)
def test_absent_keys(base_tree, path):
    key = BY_PATH[path]
    remove(base_tree, path)
    problems = read_tree(base_tree).problems
    assert problems == ([f"{path}: missing, must be {key.expected()}"] if key.required else [])


def test_a_naive_time_is_told_so(problems):
    assert problems({"orbit": {"epoch_utc": datetime(2027, 3, 14, 9, 30)}}) == [
        "orbit.epoch_utc: 2027-03-14T09:30:00 (no offset from UTC: end it with Z), must be a date-time with "
        "Z or an offset in [1980-01-01T00:00:00Z, 2030-01-01T00:00:00Z)"
    ]


@pytest.mark.parametrize(
    ("overrides", "problem"),
    [
        ({"cycle": {"perid_ms": 5}}, "cycle.perid_ms: unknown key, the nearest known key here is period_ms"),
        ({"orbit": {"dwel_s": 1}}, "orbit.dwel_s: unknown key, the nearest known key is control.dwell_s"),
        ({"coil": {"w": {"core": "air"}}}, "coil.w: unknown key"),
        ({"coil": {"x": {"turn": 3}}}, "coil.x.turn: unknown key, the nearest known key here is turns"),
        ({"body": {"inertia_kg_m2": {"yx": 0}}}, "body.inertia_kg_m2.yx: unknown key"),
        ({"magnetometr": {}}, "magnetometr: unknown key, the nearest known key here is magnetometer"),
        ({"12 34\n": 0}, '"12 34\\n": unknown key'),
    ],
)
def test_unknown_keys(problems, overrides, problem):
    (found,) = problems(overrides)
    assert found.startswith(problem)


@pytest.mark.parametrize(
    "table", ["body", "body.inertia_kg_m2", "orbit", "coil", "coil.y", "gyro", "cycle", "control", "defence", "current_sense"]
)
def test_a_table_that_is_none(problems, table):
    overrides: dict[str, object] = {}
    put(overrides, table, 3)
    (problem,) = problems(overrides)
    assert problem.startswith(f"{table}: 3, must be a table with the keys ")


def test_every_key_can_be_told_to_users():
    assert len({key.path for key in KEYS}) == len(KEYS)
    for key in KEYS:
        assert key.meaning.endswith(".") and "\n" not in key.meaning
        assert key.default_text
        assert key.choices or key.limits or key.kind in ("flag", "text")
        fixed = key.default
        if isinstance(fixed, (int, float)) and key.limits:
            assert fixed in key.limits
    told = {key.path: key.default_text for key in KEYS}
    assert told["cycle.period_ms"] == "required"
    assert told["gyro.bias_deg_s"] == "[0, 0, 0] °/s"
    assert told["control.wake_dwell_s"] == "10 s"
    assert told["control.dwell_s"] == "a quarter of the orbital period"
