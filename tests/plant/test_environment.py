"""The environment of a batch: tables, quadratics, a constant field."""

from dataclasses import replace

import numpy as np
import pytest
from plant.tern_mission import MISSION

from pyharness.plant import ConstantField
from pyharness.plant.field import FIELD, FLIGHT, GRADIENT, OrbitEnvironment, _hermite, _knots
from pyharness.plant.orbit import Trajectory, circular_rate

NOW = np.zeros(1)
DATE = MISSION.orbit.epoch_utc.replace(tzinfo=None)


def at(environment, cycle: int, x: float) -> np.ndarray:
    q0, q1, q2 = environment.quadratic(cycle)
    return q0 + x * (q1 + x * q2)


def test_a_cycle_begins_at_mid_sample():
    environment = OrbitEnvironment([MISSION], np.array([100.0]), 600.0)
    # Cycle 60 is the second knot: 30 s on, 70 ms into the cycle.
    assert np.array_equal(environment.quadratic(60)[0, ..., 0],
                          _knots(Trajectory(MISSION.orbit), np.array([130.07]), DATE)[0])


def test_cycles_join():
    environment = OrbitEnvironment([MISSION], NOW, 200.0)
    for cycle in (0, 1, 58, 59, 60, 119):
        before, after = at(environment, cycle, 1.0), at(environment, cycle + 1, 0.0)
        assert np.abs(before - after)[:, FIELD].max() < 1e-18
        assert np.abs(before - after).max() < 1e-14


def test_the_quadratic_follows_the_cubic_within_a_long_cycle():
    slow = replace(MISSION, cycle=replace(MISSION.cycle, period_ms=1000.0))
    environment = OrbitEnvironment([slow], NOW, 100.0)
    u = (7 + 0.25) / 30.0
    cubic = sum(_hermite(MISSION.orbit, 70_000, 30_000_000, 4)[0, i] * u**i for i in range(4))
    assert np.abs(at(environment, 7, 0.25)[:, FIELD, 0] - cubic[:, FIELD]).max() < 1e-14  # T


def test_the_period_need_not_divide_the_knots():
    odd = replace(MISSION, cycle=replace(MISSION.cycle, period_ms=700.0))
    environment = OrbitEnvironment([odd], NOW, 100.0)
    cycle = 71
    exact = _knots(Trajectory(MISSION.orbit), np.array([0.07 + 0.7 * cycle]), DATE)[0]
    assert np.abs(environment.quadratic(cycle)[0, :, FIELD, 0] - exact[:, FIELD]).max() < 0.03e-9


def test_vectors_have_their_magnitudes_and_directions():
    q = OrbitEnvironment([MISSION], NOW, 10.0).quadratic(0)[0, ..., 0]
    assert 15e-6 < np.linalg.norm(q[:, FIELD]) < 60e-6
    assert np.linalg.norm(q[:, FLIGHT]) == pytest.approx(1.0, abs=1e-6)
    assert np.linalg.norm(q[:, GRADIENT]) == pytest.approx(np.sqrt(3.0) * circular_rate(550.0), rel=5e-3)
    assert abs(q[:, FLIGHT] @ q[:, GRADIENT]) < 1e-2 * np.linalg.norm(q[:, GRADIENT])
    # At the ascending node of a retrograde polar orbit: outwards at the node, flying north.
    node = np.radians(40.0)
    outwards = q[:, GRADIENT] / np.linalg.norm(q[:, GRADIENT])
    assert outwards == pytest.approx((np.cos(node), np.sin(node), 0.0), abs=5e-3)
    assert q[2, FLIGHT] > 0.98


def test_spacecraft_on_one_orbit_share_its_table():
    _hermite.cache_clear()
    OrbitEnvironment([MISSION] * 20, np.zeros(20), 100.0)
    assert _hermite.cache_info().misses == 1


def test_it_does_not_depend_on_how_long_the_flight_may_last():
    short, long = (OrbitEnvironment([MISSION], NOW, seconds) for seconds in (100.0, 20_000.0))
    for cycle in (0, 100, 199):
        assert np.array_equal(short.quadratic(cycle), long.quadratic(cycle))


def test_beyond_the_duration_it_is_refused():
    environment = OrbitEnvironment([MISSION], NOW, 90.0)
    environment.quadratic(180)
    with pytest.raises(ValueError, match="duration_s"):
        environment.quadratic(240)


def test_constant_field():
    field = np.array(((1e-5, 2e-5), (0.0, 3e-5), (-4e-5, 0.0)))
    environment = ConstantField(field)
    for cycle, x in ((0, 0.0), (9, 0.7)):
        assert np.array_equal(at(environment, cycle, x)[:, FIELD], field)
        assert not at(environment, cycle, x)[:, FLIGHT:].any()
