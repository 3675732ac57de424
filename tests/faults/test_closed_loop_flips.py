"""Every bit of the inputs, flipped once in closed loop: the host stamps what really happened, so what blocks the controller blocks it for good."""

from __future__ import annotations

import numpy as np
import pytest

from pyharness.controllers import load_controller
from pyharness.events import FlipBit, LowPower, SetClock, ShiftSample, SickCoil
from pyharness.exact import constants as mrd
from pyharness.flight.records import columns
from pyharness.loop import Flight, fly
from pyharness.mission import demo_path, load_mission
from pyharness.scaling import scale

CYCLE, CYCLES = 20, 40


@pytest.fixture(scope="module")
def c():
    return load_controller("c")


@pytest.fixture(scope="module", params=["derivative", "rate"])
def scaling(request):
    return scale(load_mission(demo_path(), {"control": {"law": request.param}}))


def goes_on(record) -> bool:
    """Trusted and driven in each of the last cycles, damping."""
    last = record.outputs[-8:]
    return bool(last["trace"]["gate"]["trusted"].all() and (last["ticks"] != 0).any(axis=1).all() and (last["mode"] == mrd.MRD_MODE_DAMPING).all())


def test_every_flipped_bit_is_forgotten(c, scaling):
    """With the clock at its start and past half its wrap: which bits set it forward and which back depends on it."""
    columns_of = columns(c.interface.inputs)
    wide = [name for name in columns_of if name.endswith("_us") or "_us[" in name or name == "separation_s"]
    flips = [(name, bit) for name in columns_of for bit in range(32 if name in wide else 16)]
    for start_us in (1_000_000, 2**31 + 5_000_000):
        flights = [
            Flight(scaling, CYCLES, 3, start_us=start_us, separation_s=100, events=(FlipBit(CYCLE, "inputs", name, bit),)) for name, bit in flips
        ]
        records = fly(flights, c)
        assert not [flip for flip, record in zip(flips, records, strict=True) if not goes_on(record)]


@pytest.mark.parametrize("forward_s", [1, 37, 600, 1070, 1080, 1800, 2100])
def test_a_clock_set_forward_is_forgotten(c, scaling, forward_s):
    (record,) = fly([Flight(scaling, CYCLES, 3, separation_s=100, events=(SetClock(CYCLE, us=forward_s * 1_000_000),))], c)
    assert goes_on(record)


def test_early_samples_do_not_block(c, scaling):
    """Early by the whole tolerance, from one cycle to the next."""
    tolerance = scaling.config["path"]["tolerance_us"]
    (record,) = fly([Flight(scaling, CYCLES, 3, separation_s=100, events=(ShiftSample(CYCLE, CYCLES, every=2, us=-tolerance),))], c)
    assert goes_on(record)


def test_low_power_once_a_window_does_not_blind_the_guard(c):
    """All coils the wrong way round, beyond the tip-off rate; windows of 20 s, low power for a cycle in each."""
    short = {"defence": {"window_s": 20.0, "pause_s": 10.0, "retries": 0, "growth_percent": 0.4}}
    scaling = scale(load_mission(demo_path(), short))
    wrong = tuple(SickCoil(0, 400, coil=i, leads=-1.0) for i in range(3))
    events = (*wrong, LowPower(30, 400, every=35))
    (record,) = fly([Flight(scaling, 400, 31, rate_deg_s=(14.0, -13.0, 15.0), separation_s=100, events=events)], c)
    assert record.bit(mrd.MRD_S_DIVERGING).any()
    assert np.unique(record.outputs["mode"])[-1] == mrd.MRD_MODE_INHIBIT or record.outputs["mode"][-1] == mrd.MRD_MODE_SAFE
