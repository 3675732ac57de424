"""What many tests share: the built controller, the demo mission, a quiet hypothesis."""

from __future__ import annotations

import pytest
from hypothesis import settings

from pyharness.flight import Library
from pyharness.mission import Mission, demo_path, load_mission
from pyharness.scaling import Scaling, scale

settings.register_profile("project", deadline=None, derandomize=True, database=None, print_blob=True)
settings.load_profile("project")


@pytest.fixture(scope="session")
def library() -> Library:
    """The C controller, built from the sources."""
    return Library()


@pytest.fixture(scope="session")
def demo() -> Mission:
    """The demo mission."""
    return load_mission(demo_path())


@pytest.fixture(scope="session")
def demo_scaling(demo: Mission) -> Scaling:
    """The integers of the demo mission."""
    return scale(demo)
