"""A short flight of the demo for all tests of the review: saturated, with lost samples, late switch-offs."""

from dataclasses import replace

import pytest

from pyharness.compare import compare_with_truth
from pyharness.controllers import load_controller
from pyharness.events import DropSample, LateSwitchOff
from pyharness.loop import Flight, fly
from pyharness.mission import demo_path, load_mission
from pyharness.review import Flown
from pyharness.scaling import scale
from pyharness.vectors.verdict import Verdict

DROPPED = range(200, 203)
LATE = range(300, 330)


@pytest.fixture(scope="session")
def flights() -> list[Flown]:
    scaling = scale(load_mission(demo_path()))
    controller = load_controller("c")
    events = (
        DropSample(DROPPED.start, DROPPED.stop),
        LateSwitchOff(LATE.start, LATE.stop, coil=0, ticks=600),
    )
    records = fly(
        [Flight(scaling, 900, events=events), Flight(scaling, 300, along_field=True, seed=2)], controller
    )
    interface = controller.interface
    return [
        Flown(title, r, compare_with_truth(scaling, r.inputs, r.outputs), interface)
        for title, r in zip(("nominal tip-off", "start along the field"), records, strict=True)
    ]


@pytest.fixture(scope="session")
def flown(flights) -> Flown:
    return flights[0]


def with_mission(flown: Flown, **tables) -> Flown:
    """The same flight, as if these tables of its mission had other values: with_mission(f, control={...})."""
    mission = flown.scaling.mission
    changed = {
        name: replace(getattr(mission, name), **new) if isinstance(new, dict) else new
        for name, new in tables.items()
    }
    scaling = replace(flown.scaling, mission=replace(mission, **changed))
    return replace(flown, record=replace(flown.record, flight=replace(flown.record.flight, scaling=scaling)))


@pytest.fixture(scope="session")
def vectors() -> list[Verdict]:
    return [
        Verdict("loop/nominal", "tip-off with saturated coils", 1200, True, "equal in all columns"),
        Verdict("unit/gate", "ages at the edge of the blanking time", 37, True, "equal in all columns"),
    ]
