"""Values as they stand in messages."""

from __future__ import annotations

from datetime import UTC, datetime

import pytest

from pyharness.mission.wording import dotted, joined, quantity, rounded, shown


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (True, "true"),
        (False, "false"),
        (12, "12"),
        (12.0, "12"),
        (0.1 + 0.2, "0.30000000000000004"),
        ("cored", '"cored"'),
        ("x" * 60, '"' + "x" * 60 + '"'),
        ("x" * 61, '"' + "x" * 60 + "…" + '"'),
        ("a\nb\u2028", '"a\\nb\\u2028"'),
        (datetime(2027, 3, 14, 9, 30, tzinfo=UTC), "2027-03-14T09:30:00Z"),
        ([1, 2], "a list of 2"),
        ({"a": 1}, "a table"),
    ],
)
def test_shown(value, text):
    assert shown(value) == text


def test_an_integer_that_python_refuses_to_print():
    assert shown(1 << 100_000) == "an integer of 100001 bits"


def test_quantities_paths_and_lists():
    assert quantity(0, "A m²") == "0 A m²"
    assert quantity(3, "") == "3"
    assert rounded(1 / 3, "µT") == "0.333333 µT"
    assert dotted("", "cycle") == "cycle"
    assert dotted("cycle", "a b") == 'cycle."a b"'
    assert [joined("a"), joined("ab"), joined("abc")] == ["a", "a and b", "a, b and c"]
