"""What the tests of the mission file share: a file that loads, and the problems that changes to it bring."""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from pathlib import Path

import pytest

from pyharness.mission import MissionError, load_mission

BASE = Path(__file__).with_name("base.toml")


@pytest.fixture
def base_tree() -> dict[str, object]:
    """A fresh copy of what the file says."""
    return tomllib.loads(BASE.read_text(encoding="utf-8"))


@pytest.fixture
def problems() -> Callable[[dict[str, object]], list[str]]:
    """The problems of the file with these overrides; none if it loads."""

    def listed(overrides: dict[str, object]) -> list[str]:
        try:
            load_mission(BASE, overrides)
        except MissionError as error:
            return error.problems
        return []

    return listed
