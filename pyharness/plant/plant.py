"""The plant: N spacecraft that fly, are sampled, and answer to their coils, one control cycle at a time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pyharness.mission.model import Mission
from pyharness.plant.batch import cross, norm, spacecraft_last
from pyharness.plant.body import RigidBody, to_body, to_inertial
from pyharness.plant.coils import Coils, CoilState
from pyharness.plant.cycle import Timeline
from pyharness.plant.field import FIELD, Environment, OrbitEnvironment
from pyharness.plant.health import CoilHealth
from pyharness.plant.noise import NoiseStream, bell
from pyharness.plant.sensors import CurrentSenseModel, GyroModel, MagnetometerModel

_ATTITUDE_STREAM, _CURRENT_STREAM = 1, 2
"""Second halves of a seed; the noise of magnetometer and gyro is drawn from the seed alone."""


@dataclass(frozen=True)
class Sample:
    """Sensor counts of one cycle, each (3, N) int16. Coil currents, by channel, are 0 where no sense is fitted."""

    mag_counts: np.ndarray
    gyro_counts: np.ndarray
    driven_counts: np.ndarray  # at the end of the pulse of the cycle before; without a pulse, noise
    sampled_counts: np.ndarray  # while the magnetometer samples


@dataclass(frozen=True)
class Snapshot:
    """All that a plant carries from cycle to cycle."""

    cycle: int
    body: np.ndarray
    coils: CoilState


def attitude_from_seed(seed: int) -> np.ndarray:
    """A unit quaternion (4,), nearly uniform over rotations: four bell-shaped integers, normalised."""
    words = np.random.PCG64((seed, _ATTITUDE_STREAM)).random_raw(12)
    q = bell(words.reshape(4, 3))
    return q / norm(q)


class Plant:
    """N spacecraft in lockstep. Arrays have the spacecraft as their last axis; no result depends on the
    others.

    Between calls the plant stands at mid-sample of the current cycle: `sample` reads the sensors there, and
    `drive` flies on to the next mid-sample under that cycle's pulses.

    missions    all with the same period
    seeds       one integer ≥ 0 each: sensor noise and, unless given, attitude
    attitude    (4, N) unit quaternions, scalar first, body to inertial (TEME) axes
    rate_rad_s  (3, N), body axes; default: each mission's tip-off rate
    supply_v    (N,), default: nominal
    start_s     (N,) start of the first cycle, s after the orbit's epoch, default 0
    field       an `Environment` in place of the orbit's
    duration_s  longest flight, needed for the orbit's environment

    Raises ValueError for different periods, or counts of items that differ.
    """

    def __init__(
        self,
        missions: Sequence[Mission],
        seeds: Sequence[int],
        *,
        attitude: np.ndarray | None = None,
        rate_rad_s: np.ndarray | None = None,
        supply_v: np.ndarray | None = None,
        start_s: np.ndarray | None = None,
        field: Environment | None = None,
        duration_s: float | None = None,
    ):
        n = len(missions)
        if len(seeds) != n:
            raise ValueError(f"seeds: {len(seeds)} of them, must be {n}, one for each mission")
        timelines = [Timeline.of(m) for m in missions]
        periods = {t.period_us for t in timelines}
        if len(periods) != 1:
            raise ValueError(f"cycle.period_ms: {len(periods)} different values, must be the same in a batch")
        if field is None and duration_s is None:
            raise ValueError("duration_s: missing, needed to tabulate the environment along the orbit")

        self.period_us = periods.pop()
        self._period_s = self.period_us * 1e-6
        start_s = np.zeros(n) if start_s is None else np.asarray(start_s, dtype=float)
        self._first_sample_s = start_s + np.array([t.mid_sample_us for t in timelines]) * 1e-6
        self._environment = field or OrbitEnvironment(missions, start_s, duration_s)
        self._body = RigidBody([m.body for m in missions])
        self.coils = Coils(missions, supply_v)
        self._magnetometer = MagnetometerModel(missions)
        self._gyro = GyroModel(missions)
        self._currents = CurrentSenseModel(missions)
        self._noise = NoiseStream(seeds, channels=6)
        self._current_noise = NoiseStream([(seed, _CURRENT_STREAM) for seed in seeds], channels=6)

        if attitude is None:
            attitude = np.stack([attitude_from_seed(seed) for seed in seeds], axis=-1)
        if rate_rad_s is None:
            rate_rad_s = np.radians(spacecraft_last(m.body.tip_off_deg_s for m in missions))
        self._cycle = 0
        self._coil_state = self.coils.at_rest()
        self._state = np.empty((7, n))
        self._state[:4] = attitude
        self._state[:4] /= norm(self._state[:4])
        self._state[4:] = rate_rad_s

    @property
    def cycle(self) -> int:
        """Cycles flown."""
        return self._cycle

    @property
    def time_s(self) -> np.ndarray:
        """Now, s after each orbit's epoch, (N,)."""
        return self._first_sample_s + self._cycle * self.period_us * 1e-6

    @property
    def current_fitted(self) -> np.ndarray:
        """Which spacecraft have a current sense, (N,) bool."""
        return self._currents.fitted.copy()

    @property
    def attitude(self) -> np.ndarray:
        """Unit quaternion, scalar first, body to inertial axes, (4, N)."""
        return self._state[:4].copy()

    @property
    def rate(self) -> np.ndarray:
        """Rate against inertial axes, body axes, rad/s, (3, N)."""
        return self._state[4:].copy()

    @rate.setter
    def rate(self, rate_rad_s: np.ndarray) -> None:
        self._state[4:] = rate_rad_s

    @property
    def field_inertial(self) -> np.ndarray:
        """True field, TEME axes, T, (3, N)."""
        return self._environment.quadratic(self._cycle)[0, :, FIELD].copy()

    @property
    def field_body(self) -> np.ndarray:
        """True field, body axes, T, (3, N)."""
        return to_body(self._state[:4], self.field_inertial)

    def rate_along_field(self, rate_rad_s: float | np.ndarray) -> np.ndarray:
        """The body rate (3, N) of a spin at `rate_rad_s` along the field as it is now."""
        field = self.field_body
        return rate_rad_s * field / norm(field)

    def energy(self) -> np.ndarray:
        """Kinetic energy of rotation, J, (N,)."""
        return 0.5 * np.add.reduce(self._state[4:] * self._momentum_body(), axis=0)

    def momentum_inertial(self) -> np.ndarray:
        """Angular momentum in inertial axes, N m s, (3, N)."""
        return to_inertial(self._state[:4], self._momentum_body())

    def _momentum_body(self) -> np.ndarray:
        return np.add.reduce(self._body.inertia * self._state[4:][:, None], axis=0)

    def sample(self, offset_s: np.ndarray | None = None) -> Sample:
        """Read the sensors at the current mid-sample. Reading twice gives the same counts.

        `offset_s` (N,): how much later the field is really sampled, a small part of the period; the body
        turns on at its present rate meanwhile, so B changes by −ω × B δ + ω × (ω × B) δ²/2.
        """
        noise = self._noise.at(self._cycle)
        dipole = self._coil_state.remaining + self._coil_state.remanence
        field, rate = self.field_body, self._state[4:]
        if offset_s is not None and np.any(offset_s):
            turn = cross(field, rate)
            field = field + offset_s * (turn + 0.5 * offset_s * cross(turn, rate))
        driven, sampled = self._current_counts()
        return Sample(
            mag_counts=self._magnetometer.counts(field, rate, dipole, noise[:3]),
            gyro_counts=self._gyro.counts(rate, noise[3:]),
            driven_counts=driven,
            sampled_counts=sampled,
        )

    def _current_counts(self) -> tuple[np.ndarray, np.ndarray]:
        """Counts of both readings of the current sense."""
        state = self._coil_state
        if not self._currents.fitted.any():
            return np.zeros(state.driven.shape, np.int16), np.zeros(state.sampled.shape, np.int16)
        noise = self._current_noise.at(self._cycle)
        return self._currents.counts(state.driven, noise[:3]), self._currents.counts(state.sampled, noise[3:])

    def drive(self, ticks: np.ndarray, late_ticks: np.ndarray | None = None,
              health: CoilHealth | None = None) -> np.ndarray:
        """Drive the coils by signed `ticks` (3, N) and fly on to the next mid-sample.

        The sign of the ticks is that of the current; a coil of polarity −1 then makes a dipole along its
        negative axis. `late_ticks` (3, N): how much later than commanded a pulse is switched off. `health`: what
        is wrong with the coils until the next mid-sample; None: nothing. Returns the actual switch-off of each
        channel, µs after the start of the drive window, (3, N) int64, 0 for one not driven. Raises ValueError for a
        pulse longer than the drive window, one that is on into the next sample, a wiring that is no permutation,
        or a flight beyond `duration_s`.
        """
        drive = self.coils.drive(self._coil_state, np.asarray(ticks, dtype=np.int64), late_ticks, health)
        environment = self._environment.quadratic(self._cycle)
        self._state = self._body.propagate(self._state, environment, drive.cubic, self._period_s)
        self._coil_state = drive.state
        self._cycle += 1
        return drive.switch_off_us

    def snapshot(self) -> Snapshot:
        """A copy of the state, from which `restore` continues with the same bits."""
        return Snapshot(self._cycle, self._state.copy(), self._coil_state)

    def restore(self, snapshot: Snapshot) -> None:
        """Return to a snapshot of this plant, or of one made alike."""
        self._cycle = snapshot.cycle
        self._state = snapshot.body.copy()
        self._coil_state = snapshot.coils
