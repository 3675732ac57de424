"""Every fault that passes, flown in a short mission; and that the judgement can fail."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from pyharness.controllers import load_controller
from pyharness.exact import constants as mrd
from pyharness.faults import FAULTS, Outcome, Watched, cases, fly_matrix, watch
from pyharness.faults.catalogue import Within
from pyharness.faults.judge import judge
from pyharness.loop import Flight
from pyharness.mission import demo_path, load_mission
from pyharness.scaling import scale

ORBITS = frozenset(fault.name for fault in FAULTS if fault.orbits)
"""What only orbits tell takes minutes to fly: `slackwater faults` does, and .ci/run with it."""


@pytest.fixture(scope="module")
def c():
    return load_controller("c")


@pytest.fixture(scope="module")
def nominal(c) -> Watched:
    """A slow tumble that settles after a short dwell."""
    scaling = scale(load_mission(demo_path(), {"control": {"dwell_s": 30.0, "hold_off_s": 5}}))
    (watched,) = watch([Flight(scaling, 400, rate_deg_s=(0.9, -0.7, 0.5), separation_s=0)], c)
    assert watched.first(mrd.MRD_MODE_SETTLED) is not None
    return watched


@pytest.fixture(scope="module")
def matrix(nominal, c):
    passing = [case for case in cases(nominal, frozenset(fault.name for fault in FAULTS) - ORBITS) if not case.moment.stays]
    return fly_matrix(passing, nominal, c)


def test_all_end_as_declared(matrix):
    assert not [(r.case.fault.name, r.case.moment.name, r.problems) for r in matrix.failed]
    assert {result.case.fault.name for result in matrix.results} == {fault.name for fault in FAULTS} - ORBITS


def test_faults_strike_at_several_moments(matrix):
    moments = {}
    for result in matrix.results:
        moments.setdefault(result.case.fault.name, set()).add(result.case.moment.name)
    assert min(len(names) for names in moments.values()) >= 4


def test_no_coil_is_driven_while_a_fault_that_holds_shows(matrix):
    held = [result for result in matrix.results if result.case.fault.holds and result.shown_after]
    assert held and all(result.worst_a_m2 == 0.0 for result in held)


def of(matrix, name: str, moment: str):
    return next(r for r in matrix.results if r.case.fault.name == name and r.case.moment.name.startswith(moment))


def flown(result, c) -> Watched:
    return watch([result.case.flight], c)[0]


def test_what_shows_too_late_or_not_at_all_fails(matrix, nominal, c):
    frozen = of(matrix, "MAG_FROZEN", "early")
    limit = nominal.flight.scaling.config["path"]["frozen_limit"]
    assert frozen.shown_after == limit
    strict = replace(frozen.case, fault=replace(frozen.case.fault, within=Within("", lambda s: limit - 1)))
    assert judge(strict, flown(frozen, c), nominal).problems == (f"showed after {limit} cycles, declared: within {limit - 1}",)
    blind = replace(frozen.case, fault=replace(frozen.case.fault, shows="DIVERGING"))
    assert judge(blind, flown(frozen, c), nominal).problems == (f"did not show, declared: within {limit} cycles",)


def test_another_end_fails(matrix, nominal, c):
    safe = of(matrix, "FLIP_CONFIG", "half-way")
    assert safe.outcome is Outcome.SAFE
    other = replace(safe.case, fault=replace(safe.case.fault, passing=frozenset({Outcome.LATER})))
    assert judge(other, flown(safe, c), nominal).problems == ("ended as 'safe at once', declared: settled later",)


def test_a_coil_driven_while_the_fault_shows_fails(matrix, nominal, c):
    missing = of(matrix, "MAG_MISSING", "early")
    watched = flown(missing, c)
    watched.ticks[missing.case.setting.first + 3] = (0, 40, 0)
    (problem,) = judge(missing.case, watched, nominal).problems
    assert problem.startswith("a coil was driven by 0.00192 A m²")  # 40 of 4000 ticks of 0.24 A m² × 0.8


def ended(nominal: Watched, mode: int, rate: float, ticks: int = 0, status: int = 0) -> Watched:
    n = len(nominal.mode)
    return Watched(nominal.flight, np.full(n, status, np.uint32), np.full(n, mode, np.uint16), np.full((n, 3), ticks, np.int16),
                   np.full(n, rate, np.float32))  # fmt: skip


@pytest.mark.parametrize(
    ("mode", "rate", "ticks", "status", "outcome"),
    [
        (mrd.MRD_MODE_SETTLED, 0.1, 0, 0, Outcome.AS_WITHOUT),
        (mrd.MRD_MODE_DAMPING, 1.2, 5, 0, Outcome.DAMPED),
        (mrd.MRD_MODE_DAMPING, 1.3, 0, 0, Outcome.HELD),
        (mrd.MRD_MODE_DAMPING, 1.3, 5, 1 << mrd.MRD_S_SAMPLE_MISSING, Outcome.TOLD),
        (mrd.MRD_MODE_DAMPING, 1.3, 5, 1 << mrd.MRD_S_GYRO_MISSING, Outcome.UNSEEN),
        (mrd.MRD_MODE_SAFE, 9.0, 0, 0, Outcome.SAFE),
    ],
)
def test_ends_in_mission_terms(matrix, nominal, mode, rate, ticks, status, outcome):
    """Wake rate 1.2 °/s."""
    case = of(matrix, "MAG_MISSING", "early").case
    assert judge(case, ended(nominal, mode, rate, ticks, status), nominal).outcome is outcome
