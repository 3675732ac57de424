"""The varied flights are legal, the same every time, and really varied; the bound is the exact one."""

from __future__ import annotations

import pytest

from pyharness.faults.false_alarms import ALARMS, Alarms, varied_flights
from pyharness.mission import demo_path, load_mission


def test_flights_vary_and_repeat():
    mission = load_mission(demo_path())
    flights, again = (list(varied_flights(mission, 12, seed=4)) for _ in range(2))
    assert [f.rate_deg_s for f in flights] == [f.rate_deg_s for f in again]
    assert [f.scaling.config for f in flights] == [f.scaling.config for f in again]
    for look in (
        lambda f: f.rate_deg_s, lambda f: f.seed, lambda f: f.supply_v, lambda f: f.scaling.mission.body.inertia_kg_m2,
        lambda f: f.scaling.mission.orbit.inclination_deg, lambda f: f.scaling.config["digest"],
    ):  # fmt: skip
        assert len({look(flight) for flight in flights}) == 12


def test_the_bound_for_no_alarm_is_exact():
    """1 − 0.05^(1/n); for large n about 3/n, the rule of three (Hanley & Lippman-Hand, JAMA 249(13), 1983, from memory)."""
    none = Alarms(3000, dict.fromkeys(ALARMS, 0), 3000)
    assert none.bound("DIVERGING") == pytest.approx(9.981e-4, rel=1e-3)
    assert none.bound("DIVERGING") == pytest.approx(3 / 3000, rel=0.01)
    assert Alarms(1, dict.fromkeys(ALARMS, 0), 1).bound("DIVERGING") == pytest.approx(0.95)
    with pytest.raises(ValueError, match="DIVERGING: shown in 2 flights"):
        Alarms(10, {**none.shown, "DIVERGING": 2}, 10).bound("DIVERGING")
