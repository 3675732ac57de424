"""Rigid-body motion of N spacecraft, integrated from one mid-sample to the next.

State (7, N): the attitude as a unit quaternion (scalar first) that takes body vectors to inertial axes, then
the rate of the body against inertial axes, in body axes, rad/s.

    q̇ = ½ q ⊗ (0, ω)        J ω̇ = (J ω) × ω + torque
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from pyharness.mission.model import Body
from pyharness.plant.batch import norm, spacecraft_last
from pyharness.plant.dop853 import NODES, STAGES, WEIGHTS
from pyharness.plant.field import FIELD, FLIGHT, GRADIENT

STEP_ANGLE = 0.3
"""A step of the integrator turns the body by at most about this angle, rad."""

# Rows of (q, −q) whose products make the rotation matrix and the quaternion's derivative; 0–3 are w x y z,
# 4–7 their negatives. R = 2 (first · second + third · fourth) − 1, row by row.
_W, _X, _Y, _Z, _NW, _NX, _NY, _NZ = range(8)
_FIRST = np.array(((_W, _X, _X), (_X, _W, _Y), (_X, _Y, _W)))
_SECOND = np.array(((_W, _Y, _Z), (_Y, _W, _Z), (_Z, _Z, _W)))
_THIRD = np.array(((_X, _W, _W), (_W, _Y, _W), (_W, _W, _Z)))
_FOURTH = np.array(((_X, _NZ, _Y), (_Z, _Y, _NX), (_NY, _X, _Z)))
# q ⊗ (0, ω): row k multiplies ω_k.
_TURN = np.array(((_NX, _W, _Z, _NY), (_NY, _NZ, _W, _X), (_NZ, _Y, _NX, _W)))


def rotation(q: np.ndarray) -> np.ndarray:
    """Matrix (3, 3, N) of a unit quaternion (4, N): inertial vector = R · body vector."""
    return _rotation(np.concatenate((q, -q)))


def _rotation(both: np.ndarray) -> np.ndarray:
    r = both.take(_FIRST, axis=0) * both.take(_SECOND, axis=0)
    r += both.take(_THIRD, axis=0) * both.take(_FOURTH, axis=0)
    r *= 2.0
    for i in range(3):
        r[i, i] -= 1.0
    return r


def to_body(q: np.ndarray, vector: np.ndarray) -> np.ndarray:
    """Body components (3, N) of an inertial vector (3, N)."""
    return np.add.reduce(rotation(q) * vector[:, None], axis=0)


def to_inertial(q: np.ndarray, vector: np.ndarray) -> np.ndarray:
    """Inertial components (3, N) of a body vector (3, N)."""
    return np.add.reduce(rotation(q).swapaxes(0, 1) * vector[:, None], axis=0)


def inverse(j: np.ndarray) -> np.ndarray:
    """Inverse (3, 3, N) of symmetric matrices (3, 3, N), by the adjugate."""
    (xx, xy, xz), (_, yy, yz), (_, _, zz) = j
    a, b, c = yy * zz - yz * yz, xz * yz - xy * zz, xy * yz - xz * yy
    d, e, f = xx * zz - xz * xz, xy * xz - xx * yz, xx * yy - xy * xy
    adjugate = np.stack((a, b, c, b, d, e, c, e, f)).reshape(j.shape)
    return adjugate / (xx * a + xy * b + xz * c)


class RigidBody:
    """Inertia and constant disturbances of N spacecraft, and the integrator."""

    def __init__(self, bodies: Sequence[Body]):
        self.inertia = spacecraft_last(b.inertia_kg_m2 for b in bodies)
        self._residual = spacecraft_last(b.residual_dipole_a_m2 for b in bodies)
        # Drag is −force along the flight, at the centre of pressure: torque = (−force · arm) × flight.
        self._drag_arm = spacecraft_last([-b.drag_force_n * p for p in b.pressure_centre_m] for b in bodies)
        self._parameters = np.concatenate((
            self.inertia.reshape(9, -1), inverse(self.inertia).reshape(9, -1), self._drag_arm,
        ))

    def propagate(self, state: np.ndarray, environment: np.ndarray, dipole: np.ndarray,
                  period_s: float) -> np.ndarray:
        """State (7, N) one period later.

        `environment` (3, 3, 3, N): quadratics of `field.Environment`; `dipole` (4, 3, N): the coils' cubic, A
        m², body axes; both in x from 0 to 1. The fixed step divides the period by 1 + ⌊‖ω‖ T / 0.3⌋, each
        spacecraft by its own.
        """
        steps = 1 + np.floor(norm(state[4:]) * period_s / STEP_ANGLE).astype(int)
        dipole = dipole.copy()
        dipole[0] += self._residual
        inputs = (self._parameters, environment, dipole, steps)
        state = state.copy()
        for step in range(steps.max()):
            active = np.flatnonzero(steps > step)
            if active.size == steps.size:
                state = _step(state, step, period_s, *inputs)
            else:
                some = (a.take(active, axis=-1) for a in (state, *inputs))
                state[:, active] = _step(next(some), step, period_s, *some)
        state[:4] /= norm(state[:4])
        return state


def _step(state: np.ndarray, step: int, period_s: float, parameters: np.ndarray, environment: np.ndarray,
          dipole: np.ndarray, steps: np.ndarray) -> np.ndarray:
    """One step of DOP853, the `step`-th of each spacecraft's `steps`."""
    n = steps.size
    # Overwritten by every stage: factors of four cross products, x and y repeated below z; (q, −q); slopes.
    left, right, both, k = np.empty((4, 5, n)), np.empty((4, 5, n)), np.empty((8, n)), np.empty((12, 7, n))
    work = left, right, both
    inertia, inverse_inertia = parameters[:9].reshape(3, 3, n), parameters[9:18].reshape(3, 3, n)
    left[1, :3] = parameters[18:]

    x = (step + NODES[:, None]) / steps
    x_env = x[:, None, None]
    environments = environment[0] + x_env * (environment[1] + x_env * environment[2])
    x_coil = x[:, None]
    dipoles = dipole[0] + x_coil * (dipole[1] + x_coil * (dipole[2] + x_coil * dipole[3]))

    h = period_s / steps
    for stage in range(12):
        y = state
        if stage:
            y = state + h * np.add.reduce(STAGES[stage, :stage, None, None] * k[:stage], axis=0)
        _derivative(y, environments[stage], dipoles[stage], inertia, inverse_inertia, work, k[stage])
    return state + h * np.add.reduce(WEIGHTS[:, None, None] * k, axis=0)


def _derivative(y: np.ndarray, environment: np.ndarray, dipole: np.ndarray, inertia: np.ndarray,
                inverse_inertia: np.ndarray, work: tuple[np.ndarray, ...], out: np.ndarray) -> None:
    """dy/dt of the state (7, N) into `out`.

    Four cross products at once: dipole × field, drag arm × flight, (−J s) × s of gravity, and (J ω) × ω.
    """
    q, rate = y[:4], y[4:]
    left, right, both = work
    both[:4] = q
    np.negative(q, out=both[4:])
    np.add.reduce(both.take(_TURN, axis=0) * (0.5 * rate[:, None]), axis=0, out=out[:4])

    # (3 components, 3 vectors, N)
    body = np.add.reduce(_rotation(both)[:, :, None] * environment[:, None], axis=0)
    turning = right[2:, :3]
    right[0, :3] = body[:, FIELD]
    right[1, :3] = body[:, FLIGHT]
    turning[0] = body[:, GRADIENT]
    turning[1] = rate
    left[0, :3] = dipole
    np.add.reduce(inertia[:, None] * turning.swapaxes(0, 1)[:, :, None], axis=0, out=left[2:, :3])
    np.negative(left[2, :3], out=left[2, :3])
    left[:, 3:] = left[:, :2]
    right[:, 3:] = right[:, :2]

    torques = left[:, 1:4] * right[:, 2:]
    torques -= left[:, 2:] * right[:, 1:4]
    torque = np.add.reduce(torques, axis=0)
    np.add.reduce(inverse_inertia * torque[:, None], axis=0, out=out[4:])
