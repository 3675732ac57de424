"""Attitude algebra and the integrator's bookkeeping; the motion itself is in
tests/outside/test_rigid_body.py."""

import numpy as np
import pytest
from plant.tern_mission import MISSION
from scipy.integrate._ivp import dop853_coefficients
from scipy.spatial.transform import Rotation

from pyharness.plant import body as body_module
from pyharness.plant.body import RigidBody, inverse, rotation, to_body, to_inertial
from pyharness.plant.dop853 import NODES, STAGES, WEIGHTS


def quaternions(n: int) -> np.ndarray:
    q = np.random.default_rng(0).normal(size=(4, n))
    return q / np.linalg.norm(q, axis=0)


def test_rotation_against_scipy():
    q = quaternions(50)
    expected = Rotation.from_quat(q[[1, 2, 3, 0]].T).as_matrix()
    assert np.moveaxis(rotation(q), -1, 0) == pytest.approx(expected, abs=1e-14)


def test_to_body_undoes_to_inertial():
    q, v = quaternions(50), np.random.default_rng(1).normal(size=(3, 50))
    assert to_inertial(q, v) == pytest.approx(Rotation.from_quat(q[[1, 2, 3, 0]].T).apply(v.T).T, abs=1e-14)
    assert to_body(q, to_inertial(q, v)) == pytest.approx(v, abs=1e-14)


def test_inverse_by_the_adjugate():
    a = np.random.default_rng(2).normal(size=(20, 3, 3))
    j = np.moveaxis(a @ a.transpose(0, 2, 1) + np.eye(3), 0, -1)
    assert np.moveaxis(inverse(j), -1, 0) == pytest.approx(np.linalg.inv(np.moveaxis(j, -1, 0)), rel=1e-12)


def test_coefficients_are_those_of_scipy():
    assert np.array_equal(STAGES, dop853_coefficients.A[:12, :12])
    assert np.array_equal(WEIGHTS, dop853_coefficients.B)
    assert np.array_equal(NODES, dop853_coefficients.C[:12])
    assert STAGES.sum(axis=1) == pytest.approx(NODES, abs=1e-14)


@pytest.mark.parametrize(("rate", "steps"), [(0.0, 1), (0.59, 1), (0.61, 2), (1.19, 2), (1.21, 3)])
def test_a_step_turns_by_at_most_three_tenths_of_a_radian(rate, steps, monkeypatch):
    taken = []
    step = body_module._step
    monkeypatch.setattr(body_module, "_step", lambda *a: taken.append(a[1]) or step(*a))
    state = np.array((1.0, 0.0, 0.0, 0.0, 0.0, rate, 0.0))[:, None]
    RigidBody([MISSION.body]).propagate(state, np.zeros((3, 3, 3, 1)), np.zeros((4, 3, 1)), 0.5)
    assert taken == list(range(steps))
