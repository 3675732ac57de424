"""Coils: from signed timer ticks to the dipole that turns the body and to what the magnetometer sees of it.

A pulse's dipole is a rectangle convolved with exp(−t/τ)/τ, τ = L/R; each pulse starts from zero current,
which blanking that lets the current decay makes true. The body integrates a cubic instead, which has the same
first four moments over the interval from one mid-sample to the next (the projection on the Legendre
polynomials P0 to P3), so that a step of the integrator needs no stop at the edges. The magnetometer sees the
exact edges.

What a core keeps of a pulse, its remanence, acts from switch-off until the next pulse of that coil starts:
during a pulse the full dipole is all there is.

A coil that is held on makes its dipole from one mid-sample to the next, and is seen by the magnetometer at the
latter; its pulses then do nothing. It is on or off at once: against a cycle, L/R is short.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

import numpy as np

from pyharness.mission.model import AXES, Mission
from pyharness.plant.batch import round_to, spacecraft_last
from pyharness.plant.cycle import Timeline
from pyharness.plant.health import CoilHealth

_TABLE_BITS = 40

_CUBIC_FROM_MOMENTS = (
    (16, -120, 240, -140),
    (-120, 1200, -2700, 1680),
    (240, -2700, 6480, -4200),
    (-140, 1680, -4200, 2800),
)
"""Inverse of the 4 × 4 Hilbert matrix: moments ∫ f xⁿ dx over [0, 1] to the coefficients of the cubic that
has them."""


def _cubic(moments: Sequence[Fraction]) -> list[Fraction]:
    return [sum(h * m for h, m in zip(row, moments, strict=True)) for row in _CUBIC_FROM_MOMENTS]


def _rectangle_moment(power: int, start: Fraction, tick: Fraction) -> list[Fraction]:
    """∫ xᵖ dx from `start` over n ticks, as the coefficients of n¹ … n⁴."""
    moment = [Fraction(0)] * 4
    for k in range(1, power + 2):
        moment[k - 1] = math.comb(power + 1, k) * start ** (power + 1 - k) * tick**k / (power + 1)
    return moment


@lru_cache(maxsize=256)
def _pulse_cubic(timeline: Timeline, time_constant_ms: float) -> tuple[tuple[float, ...], ...]:
    """The cubic in x = t/T of a unit pulse of n ticks: row i holds the coefficients of n¹ … n⁴ in that of xⁱ.

    With the delay X of the exponential, E[Xʲ] = j! τʲ, the moments of the convolution are Σ_j binom(p, j) j!
    τʲ ∫ x^(p−j) over the rectangle. The tail is counted whole, also what little lies beyond T.
    """
    start = Fraction(timeline.delay_us, timeline.period_us)
    tick = Fraction(timeline.tick_us, timeline.period_us)
    tau = Fraction(time_constant_ms) * 1000 / timeline.period_us
    rectangle = [_rectangle_moment(power, start, tick) for power in range(4)]
    by_ticks = [
        _cubic([sum(math.perm(p, j) * tau**j * rectangle[p - j][n] for j in range(p + 1)) for p in range(4)])
        for n in range(4)
    ]
    return tuple(tuple(float(by_ticks[n][i]) for n in range(4)) for i in range(4))


@lru_cache(maxsize=256)
def _before_window_cubic(timeline: Timeline) -> tuple[float, ...]:
    """The cubic in x of what is 1 until the drive window opens and 0 after."""
    start = Fraction(timeline.delay_us, timeline.period_us)
    return tuple(float(c) for c in _cubic([start ** (p + 1) / (p + 1) for p in range(4)]))


@lru_cache(maxsize=256)
def _edge_tables(timeline: Timeline, time_constant_ms: float) -> tuple[np.ndarray, np.ndarray]:
    """By the tick of switch-off: the fraction of full dipole reached, and its mean left over the next
    sample."""
    tau_us = time_constant_ms * 1000.0
    ticks = np.arange(timeline.ticks_to_next_sample + 1)
    reached = -np.expm1(-ticks * timeline.tick_us / tau_us)
    over_sample = -math.expm1(-timeline.sample_us / tau_us) * tau_us / timeline.sample_us
    left = reached * np.exp(-timeline.age_at_next_sample_us(ticks) / tau_us) * over_sample
    return round_to(reached, _TABLE_BITS), round_to(left, _TABLE_BITS)


@dataclass(frozen=True)
class CoilState:
    """What a cycle leaves behind, each (3, N).

    Dipoles along body axes, A m²; currents by channel, in parts of the full one at the nominal supply voltage.
    """

    remaining: np.ndarray  # dipole of current that flows during the next sample, its mean
    remanence: np.ndarray  # dipole in the core
    driven: np.ndarray  # current at the end of the pulse; 0 without one
    sampled: np.ndarray  # mean current during the next sample


@dataclass(frozen=True)
class Drive:
    """What one cycle's pulses do."""

    state: CoilState
    cubic: np.ndarray  # (4, 3, N), A m²: dipole as Σ cubic[i] xⁱ, x from 0 to 1 between mid-samples
    switch_off_us: np.ndarray  # (3, N) int64, after the start of the drive window; 0 for a coil not driven


def _check(name: str, width: np.ndarray, limit: np.ndarray) -> None:
    wrong = np.argwhere((width < 0) | (width > limit))
    if wrong.size:
        axis, craft = wrong[0]
        raise ValueError(
            f"{name}: pulse of {width[axis, craft]} ticks on {AXES[axis]} of spacecraft {craft}, "
            f"must be in [0, {limit[craft]}]"
        )


class Coils:
    """The three coils of N spacecraft; `supply_v` (N,) is the voltage that drives them (None: nominal)."""

    def __init__(self, missions: Sequence[Mission], supply_v: np.ndarray | None = None):
        timelines = [Timeline.of(m) for m in missions]
        nominal_v = spacecraft_last(m.supply.nominal_v for m in missions)
        supply = np.ones(len(missions)) if supply_v is None else np.asarray(supply_v, dtype=float) / nominal_v

        def per_coil(value) -> np.ndarray:
            return spacecraft_last([value(coil) for coil in m.coil] for m in missions)

        self._supply = supply
        self._full = per_coil(lambda coil: coil.polarity * coil.dipole_a_m2) * supply
        self._kept = per_coil(lambda coil: coil.remanence_fraction)
        self._tau_s = per_coil(lambda coil: coil.time_constant_ms) * 1e-3
        self._tick_us = np.array([t.tick_us for t in timelines])
        self._window_ticks = np.array([t.window_ticks for t in timelines])
        self._last_tick = np.array([t.ticks_to_next_sample for t in timelines])

        lags = [(Timeline.of(m), [coil.time_constant_ms for coil in m.coil]) for m in missions]
        # A core's remanence is overridden for just as long as the pulse lasts: without L/R.
        pulse = spacecraft_last([_pulse_cubic(t, tau) for tau in taus] for t, taus in lags)
        rectangle = spacecraft_last([_pulse_cubic(t, 0.0) for _ in taus] for t, taus in lags)
        # (4 powers of ticks, pulse and rectangle, 4 powers of x, 3, N)
        self._by_ticks = np.ascontiguousarray(np.stack((pulse, rectangle)).transpose(3, 0, 2, 1, 4))
        self._before = spacecraft_last(_before_window_cubic(t) for t in timelines)[:, None]
        self._after = -self._before
        self._after[0] += 1.0
        # The edge tables of all distinct coils, end to end; `_first` says where each coil's begins.
        tables = {(t, tau): _edge_tables(t, tau) for t, taus in lags for tau in taus}
        self._reached, self._left = (np.concatenate(tables) for tables in zip(*tables.values(), strict=True))
        ends = np.cumsum([reached.size for reached, _ in tables.values()])
        begins = dict(zip(tables, [0, *ends], strict=False))
        self._first = np.array([[begins[t, tau] for tau in taus] for t, taus in lags]).T

    @property
    def full_dipole(self) -> np.ndarray:
        """Dipole of positive ticks held on, A m², shape (3, N), with the polarity's sign."""
        return self._full.copy()

    def at_rest(self) -> CoilState:
        """No current, no remanence."""
        return CoilState(*np.zeros((4, *self._full.shape)))

    def _widths(self, ticks: np.ndarray, late_ticks: np.ndarray | None) -> np.ndarray:
        width = np.abs(ticks)
        _check("ticks", width, self._window_ticks)
        if late_ticks is None:
            return width
        width = width + np.where(width > 0, late_ticks, 0)
        _check("ticks + late_ticks", width, self._last_tick)
        return width

    def drive(self, state: CoilState, ticks: np.ndarray, late_ticks: np.ndarray | None = None,
              health: CoilHealth | None = None) -> Drive:
        """Pulses of signed `ticks` (3, N) ints, each switched off `late_ticks` after it should have been.

        Both are by channel, which is also the coil unless `health` says otherwise. Raises ValueError for a pulse
        longer than the drive window, or still on when the next sample starts, and for a wiring that is no
        permutation.
        """
        width = self._widths(ticks, late_ticks)
        switch_off_us = width * self._tick_us
        if health is None:
            return Drive(*self._pulses(state, width, np.sign(ticks), self._full), switch_off_us)

        channel = health.driven_by()
        current = health.current * np.sign(ticks)
        current, width, held = (np.take_along_axis(a, channel, axis=0) for a in (current, width, health.held))
        full = self._full * health.leads
        after, cubic = self._pulses(state, np.where(current != 0, width, 0), current, full)
        return Drive(*self._held_on(after, cubic, held, full, health.wiring), switch_off_us)

    def _pulses(self, state: CoilState, width: np.ndarray, current: np.ndarray,
                full: np.ndarray) -> tuple[CoilState, np.ndarray]:
        """State and cubic after pulses of `width` ticks; `current` is a signed part of what makes the dipole `full`."""
        strength = full * current
        entry = self._first + width
        reached, left = self._reached.take(entry), self._left.take(entry)
        n = width.astype(float)
        p1, p2, p3, p4 = self._by_ticks
        pulse, rectangle = n * (p1 + n * (p2 + n * (p3 + n * p4)))
        remanence = np.where(width > 0, self._kept * strength * reached, state.remanence)
        cubic = strength * pulse + state.remanence * self._before + remanence * (self._after - rectangle)
        current = self._supply * current
        return CoilState(strength * left, remanence, current * reached, current * left), cubic

    def _held_on(self, state: CoilState, cubic: np.ndarray, held: np.ndarray, full: np.ndarray,
                 wiring: np.ndarray) -> tuple[CoilState, np.ndarray]:
        """The same with the coils that are held on, all of it by coil; the currents returned are by channel."""
        on = held != 0
        dipole, current = full * held, self._supply * held
        kept = self._kept * dipole
        constant = np.zeros_like(cubic)
        constant[0] = dipole
        after = CoilState(
            remaining=np.where(on, dipole - kept, state.remaining),  # with the remanence, the dipole
            remanence=np.where(on, kept, state.remanence),
            driven=np.take_along_axis(np.where(on, current, state.driven), wiring, axis=0),
            sampled=np.take_along_axis(np.where(on, current, state.sampled), wiring, axis=0),
        )
        return after, np.where(on, constant, cubic)

    def waveform(self, ticks: np.ndarray, seconds: np.ndarray,
                 late_ticks: np.ndarray | None = None) -> np.ndarray:
        """Exact pulse dipole (K, 3, N), A m², at K times, s after the start of the drive window; for
        figures."""
        width_s = self._widths(ticks, late_ticks) * self._tick_us * 1e-6
        t = np.asarray(seconds, dtype=float)[:, None, None]
        reached = -np.expm1(-np.clip(t, 0.0, width_s) / self._tau_s)
        return self._full * np.sign(ticks) * reached * np.exp(-np.maximum(t - width_s, 0.0) / self._tau_s)
