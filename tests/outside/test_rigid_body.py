"""Rigid-body motion against closed forms and an independent integrator."""

import math

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.special import ellipj, ellipk

from pyharness.mission.model import Body
from pyharness.plant import body as body_module
from pyharness.plant.body import RigidBody, to_body, to_inertial
from pyharness.plant.field import FIELD, FLIGHT, GRADIENT
from pyharness.plant.orbit import circular_rate

FREE = np.zeros((3, 3, 3, 1))
NO_DIPOLE = np.zeros((4, 3, 1))
ZERO = (0.0, 0.0, 0.0)


def solid(inertia, residual=ZERO, drag=0.0, pressure_centre=ZERO) -> Body:
    inertia = np.array(inertia, dtype=float)
    matrix = np.diag(inertia) if inertia.ndim == 1 else inertia
    return Body(tuple(map(tuple, matrix.tolist())), ZERO, residual, drag, pressure_centre)


def state(rate_deg_s, q=(1.0, 0.0, 0.0, 0.0)) -> np.ndarray:
    return np.concatenate((q, np.radians(rate_deg_s)))[:, None]


def fly(bodies, start, seconds, period_s=0.5, environment=FREE, dipole=NO_DIPOLE):
    rigid = RigidBody(bodies)
    for _ in range(round(seconds / period_s)):
        start = rigid.propagate(start, environment, dipole, period_s)
    return start


def test_torque_free_symmetric_top():
    """λ = (I3 − I1) ω3 / I1; inertial precession at H/I1 (Goldstein, *Classical Mechanics*, from memory)."""
    i1, i3 = 0.05, 0.03
    end = fly([solid((i1, i1, i3))], state((3.0, 0.0, 10.0)), 100.0)
    assert np.degrees(end[4:, 0]) == pytest.approx((2.298133, -1.928363, 10.0), abs=5e-7)

    spin = (i3 - i1) / i1 * math.radians(10.0)
    assert 2.0 * math.pi / abs(spin) == pytest.approx(90.0)
    assert end[4:, 0] == pytest.approx(
        np.radians((3.0 * math.cos(100.0 * spin), 3.0 * math.sin(100.0 * spin), 10.0)), abs=1e-14)

    # The symmetry axis has turned about the fixed H by H/I1 · t.
    h = np.array((i1, i1, i3)) * np.radians((3.0, 0.0, 10.0))
    precession = np.linalg.norm(h) / i1
    assert math.degrees(precession) == pytest.approx(6.708204, abs=5e-7)
    h_hat, axis, angle = h / np.linalg.norm(h), np.array((0.0, 0.0, 1.0)), 100.0 * precession
    expected = (axis * math.cos(angle) + np.cross(h_hat, axis) * math.sin(angle)
                + h_hat * (h_hat @ axis) * (1.0 - math.cos(angle)))
    assert to_inertial(end[:4], axis[:, None])[:, 0] == pytest.approx(expected, abs=1e-12)


def test_torque_free_asymmetric_top():
    """Jacobi functions for H² > 2 E I2 (Landau & Lifshitz, *Mechanics*, § 37, from memory; scipy's
    `ellipj`)."""
    i1, i2, i3 = 0.030, 0.045, 0.060
    w1, w3 = math.radians(5.0), math.radians(5.0)
    h2, e2 = (i1 * w1) ** 2 + (i3 * w3) ** 2, i1 * w1 * w1 + i3 * w3 * w3
    speed = math.sqrt((i3 - i2) * (h2 - e2 * i1) / (i1 * i2 * i3))
    m = (i2 - i1) * (e2 * i3 - h2) / ((i3 - i2) * (h2 - e2 * i1))
    assert 4.0 * ellipk(m) / speed == pytest.approx(147.197512, abs=5e-7)

    sn, cn, dn, _ = ellipj(speed * 100.0, m)
    w2 = math.sqrt((e2 * i3 - h2) / (i2 * (i3 - i2)))
    end = fly([solid((i1, i2, i3))], state((5.0, 0.0, 5.0)), 100.0)[4:, 0]
    assert np.degrees(end) == pytest.approx((-1.848757, -5.364339, 3.769476), abs=5e-7)
    assert end == pytest.approx((w1 * cn, w2 * sn, w3 * dn), abs=1e-14)


@pytest.mark.parametrize(
    ("rates_deg_s", "seconds"),
    [((1.0, 10.0), 5739.0), ((60.0,), 574.0)],  # an orbit, and a tenth of one
)
def test_energy_and_inertial_momentum_are_kept_without_torque(rates_deg_s, seconds):
    inertia = np.array(((0.0108, 0.0007, -0.0005), (0.0007, 0.0312, 0.0004), (-0.0005, 0.0004, 0.0330)))
    n = len(rates_deg_s)
    direction = np.array((0.5, -0.5, math.sqrt(0.5)))
    start = np.concatenate([state(direction * rate, q=(0.5, 0.5, -0.5, 0.5)) for rate in rates_deg_s], axis=1)
    end = fly([solid(inertia)] * n, start, seconds, 1.0, np.zeros((3, 3, 3, n)), np.zeros((4, 3, n)))

    def momentum(s):
        return to_inertial(s[:4], inertia @ s[4:])

    def energy(s):
        return 0.5 * np.sum(s[4:] * (inertia @ s[4:]), axis=0)

    assert (np.abs(end[4:] - start[4:]).max(axis=0) > 0.1 * np.abs(start[4:]).max(axis=0)).all()  # it tumbled
    assert energy(end) == pytest.approx(energy(start), rel=1e-11)
    moved = np.linalg.norm(momentum(end) - momentum(start), axis=0)
    assert (moved <= 1e-11 * np.linalg.norm(momentum(start), axis=0)).all()


def reference(body: Body, start, environment, dipole, seconds):
    """scipy's DOP853 on equations written with matrices, independently of the plant's."""
    j = np.array(body.inertia_kg_m2)

    def slope(t, y):
        q, w = y[:4] / np.linalg.norm(y[:4]), y[4:]
        s, v = q[0], q[1:]
        k = np.array(((0, -v[2], v[1]), (v[2], 0, -v[0]), (-v[1], v[0], 0)))
        to_inertial_matrix = np.eye(3) + 2.0 * s * k + 2.0 * k @ k
        x = t / seconds
        vectors = to_inertial_matrix.T @ (environment[0] + x * environment[1] + x * x * environment[2])
        field, flight, gradient = vectors[:, FIELD], vectors[:, FLIGHT], vectors[:, GRADIENT]
        m = dipole[0] + dipole[1] * x + dipole[2] * x**2 + dipole[3] * x**3 + body.residual_dipole_a_m2
        torque = (np.cross(m, field) + np.cross(gradient, j @ gradient)
                  + np.cross(body.pressure_centre_m, -body.drag_force_n * flight))
        q_dot = 0.5 * np.concatenate(([-v @ w], s * w + np.cross(v, w)))
        return np.concatenate((q_dot, np.linalg.solve(j, torque - np.cross(w, j @ w))))

    return solve_ivp(slope, (0.0, seconds), start, method="DOP853", rtol=1e-12, atol=1e-16).y[:, -1]


@pytest.mark.parametrize("rate_deg_s", [(0.1, -0.05, 0.02), (12.0, -11.0, 13.0), (-90.0, 60.0, 30.0)])
def test_every_torque_against_an_independent_integrator(rate_deg_s):
    rng = np.random.default_rng(1)
    inertia = ((0.0108, 0.0007, -0.0005), (0.0007, 0.0312, 0.0004), (-0.0005, 0.0004, 0.0330))
    body = solid(inertia, residual=(0.1, -0.2, 0.3), drag=1e-4, pressure_centre=(0.12, 0.06, -0.04))
    q = rng.normal(size=4)
    start = state(rate_deg_s, q / np.linalg.norm(q))
    # Each torque about 1e-5 N m, as strong as a coil's, and varying over the cycle.
    environment = rng.normal(size=(3, 3, 3, 1)) * np.array((4e-5, 1.0, 0.02))[:, None]
    dipole = 0.2 * rng.normal(size=(4, 3, 1))
    end = fly([body], start, 0.5, environment=environment, dipole=dipole)
    expected = reference(body, start[:, 0], environment[..., 0], dipole[..., 0], 0.5)
    assert end[:, 0] == pytest.approx(expected, abs=1e-10)


def test_the_step_has_order_eight(monkeypatch):
    monkeypatch.setattr(body_module, "STEP_ANGLE", 1e9)  # one step a period
    tumbling = [solid((0.030, 0.045, 0.060))], state((40.0, 5.0, 40.0)), 24.0
    exact = fly(*tumbling, period_s=0.1)
    coarse, fine = (np.abs(fly(*tumbling, period_s=t) - exact).max() for t in (2.0, 1.0))
    assert fine > 1e-11  # far above rounding
    assert 2.0**7.4 < coarse / fine < 2.0**9.2


def torque_at_rest(body: Body, q, vector: int, value, dipole=ZERO):
    """The torque on a body at rest, from the rate it gains in 1 ms in a constant environment."""
    environment, cubic = FREE.copy(), NO_DIPOLE.copy()
    environment[0, :, vector, 0], cubic[0, :, 0] = value, dipole
    end = RigidBody([body]).propagate(state(ZERO, q), environment, cubic, 1e-3)
    return np.array(body.inertia_kg_m2) @ end[4:, 0] / 1e-3


def test_largest_gravity_gradient_torque():
    """3μ/r³ r̂ × J r̂, largest 1.5 n² ΔI at 45° (Markley & Crassidis 2014, ch. 3, from memory)."""
    n = circular_rate(550.0)
    gradient = math.sqrt(3.0) * n * np.array((math.sqrt(0.5), math.sqrt(0.5), 0.0))
    torque = torque_at_rest(solid((0.02, 0.05, 0.04)), (1.0, 0.0, 0.0, 0.0), GRADIENT, gradient)
    assert torque == pytest.approx((0.0, 0.0, 5.3939e-8), rel=2e-5, abs=1e-15)
    assert torque[2] == pytest.approx(1.5 * n * n * 0.03, rel=1e-6)


def test_gravity_pulls_a_long_axis_towards_the_vertical():
    """Long along x (small Jx), x tilted from the vertical: the torque turns x towards it."""
    tilt = math.radians(20.0)
    vertical = np.array((math.cos(tilt), math.sin(tilt), 0.0))
    torque = torque_at_rest(solid((0.01, 0.05, 0.05)), (1.0, 0.0, 0.0, 0.0), GRADIENT, 2e-3 * vertical)
    assert np.sign(torque[2]) == np.sign(np.cross((1.0, 0.0, 0.0), vertical)[2])


def test_drag_acts_against_the_flight_at_the_centre_of_pressure():
    body = solid((0.02, 0.03, 0.04), drag=2e-6, pressure_centre=(0.1, 0.0, 0.0))
    torque = torque_at_rest(body, (1.0, 0.0, 0.0, 0.0), FLIGHT, (0.0, 1.0, 0.0))
    assert torque == pytest.approx((0.0, 0.0, -2e-7), rel=1e-6, abs=1e-15)


def test_signs_of_the_rate_law_and_of_its_torque():
    """Figures from the closed form: m = k (ω × B), τ = m × B, power −k ‖ω × B‖²."""
    rate, field = np.array((0.1, -0.2, 0.3)), np.array((20e-6, -30e-6, 10e-6))
    m = 1e4 * np.cross(rate, field)
    assert m == pytest.approx((0.07, 0.05, 0.01))

    sphere = solid((0.04, 0.04, 0.04))
    torque = torque_at_rest(sphere, (1.0, 0.0, 0.0, 0.0), FIELD, field, dipole=m)
    assert torque == pytest.approx((0.8e-6, -0.5e-6, -3.1e-6), rel=1e-6)
    assert torque @ field == pytest.approx(0.0, abs=1e-16)

    # The same dipole on the spinning body: power is torque · rate.
    environment, cubic = FREE.copy(), NO_DIPOLE.copy()
    environment[0, :, FIELD, 0], cubic[0, :, 0] = field, m
    end = RigidBody([sphere]).propagate(state(np.degrees(rate)), environment, cubic, 1e-3)[4:, 0]
    power = 0.5 * 0.04 * (end @ end - rate @ rate) / 1e-3
    assert power == pytest.approx(-7.5e-7, rel=1e-3)
    assert -1e4 * np.linalg.norm(np.cross(rate, field)) ** 2 == pytest.approx(-7.5e-7)


def test_no_dipole_changes_the_rate_about_the_field():
    field = np.array((20e-6, -30e-6, 10e-6))
    for dipole in np.eye(3):
        torque = torque_at_rest(solid((0.04, 0.04, 0.04)), (1.0, 0.0, 0.0, 0.0), FIELD, field, dipole=dipole)
        assert np.linalg.norm(torque) > 1e-6
        assert abs(torque @ field) <= 1e-7 * np.linalg.norm(torque) * np.linalg.norm(field)


def test_an_inertially_fixed_field_turns_against_the_body():
    """d/dt of its body components is −ω × B."""
    field = np.array((2.0, -3.0, 1.0))[:, None]
    start = state((7.0, 5.0, -4.0), q=(0.5, 0.5, -0.5, 0.5))
    end = RigidBody([solid((0.04, 0.04, 0.04))]).propagate(start, FREE, NO_DIPOLE, 1e-5)
    change = (to_body(end[:4], field) - to_body(start[:4], field))[:, 0] / 1e-5
    expected = -np.cross(start[4:, 0], to_body(start[:4], field)[:, 0])
    assert change == pytest.approx(expected, rel=1e-5)
    assert np.linalg.norm(expected) > 0.1
