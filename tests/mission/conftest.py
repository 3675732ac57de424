"""What all tests of the mission file share: the demo's tree, and the problems that a change to it brings."""

from __future__ import annotations

import tomllib
from collections.abc import Callable

import pytest

from pyharness.mission import MissionError, demo_path, load_mission


@pytest.fixture
def demo_tree() -> dict[str, object]:
    """A fresh copy of what the demo file says."""
    return tomllib.loads(demo_path().read_text(encoding="utf-8"))


@pytest.fixture
def problems() -> Callable[[dict[str, object]], list[str]]:
    """The problems of the demo with these overrides; none if it loads."""

    def listed(overrides: dict[str, object]) -> list[str]:
        try:
            load_mission(demo_path(), overrides)
        except MissionError as error:
            return error.problems
        return []

    return listed
