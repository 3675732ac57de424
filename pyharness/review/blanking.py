"""How long each coil's current has to decay before a sample, and how long it is given."""

from __future__ import annotations

import math
from dataclasses import dataclass

from pyharness.mission import AXES
from pyharness.scaling import Q15, Scaling


@dataclass(frozen=True)
class BlankingMargin:
    """One coil. The stray field is that on the magnetometer axis that sees most of it."""

    coil: str
    time_constant_ms: float
    stray_nt: float  # of the full dipole, at the highest supply voltage
    remanence_nt: float  # what a core keeps of it: blanking does not help against this
    tolerated_nt: float  # one magnetometer count
    needed_ms: float
    required_ms: float  # what the gate asks for
    given_ms: float  # what the timeline leaves after the longest pulse
    chased: float  # demand that reversing a full pulse causes through the core's remanence, part of the limit

    @property
    def margin_ms(self) -> float:
        """What the gate asks for beyond what is needed."""
        return self.required_ms - self.needed_ms


def worst_stray_t_per_a_m2(scaling: Scaling, coil: int) -> float:
    """Stray field of a coil per dipole on the body axis that sees most of it, T per A m²."""
    return max(abs(row[coil]) for row in scaling.mission.magnetometer.stray_ut_per_a_m2) * 1e-6


def blanking_needed_ms(time_constant_ms: float, stray: float, tolerated: float) -> float:
    """(L/R) ln(stray field at full dipole / tolerated error); both fields in the same unit."""
    return time_constant_ms * math.log(max(stray / tolerated, 1.0))


def chased_remanence(scaling: Scaling, coil: int) -> float:
    """Demand on a coil's own axis, as a part of its limit, when the remanence of a full pulse changes sign.

    The derivative law takes the change 2 b of the stray field between two samples for a turn of the body:
    m = −k 2 b / T, less by the low-pass. Positive: it asks for a pulse against the last one, which from 1 on
    repeats itself for ever; negative: it asks for one more like the last.
    """
    part, stray = (
        scaling.mission.coil[coil],
        scaling.mission.magnetometer.stray_ut_per_a_m2[coil][coil] * 1e-6,
    )
    change_t = 2.0 * part.remanence_fraction * part.dipole_a_m2 * stray
    smoothing = scaling.config["path"]["filter_gain"] / Q15
    return smoothing * scaling.gain.k_am2_s_per_t * change_t / scaling.period_s / scaling.dipole_a_m2[coil]


def blanking_margins(scaling: Scaling) -> list[BlankingMargin]:
    """The margin of each coil, tolerating one magnetometer count."""
    return [_margin(scaling, coil) for coil in range(3)]


def _margin(scaling: Scaling, index: int) -> BlankingMargin:
    mission, timeline = scaling.mission, scaling.timeline
    coil = mission.coil[index]
    highest = coil.dipole_a_m2 * mission.supply.max_v / mission.supply.nominal_v
    stray_nt = worst_stray_t_per_a_m2(scaling, index) * highest * 1e9
    count_nt = scaling.raw_field_t * 1e9
    return BlankingMargin(
        coil=AXES[index],
        time_constant_ms=coil.time_constant_ms,
        stray_nt=stray_nt,
        remanence_nt=stray_nt * coil.remanence_fraction,
        tolerated_nt=count_nt,
        needed_ms=blanking_needed_ms(coil.time_constant_ms, stray_nt, count_nt),
        required_ms=coil.blanking_ms,
        given_ms=timeline.age_at_next_sample_us(timeline.window_ticks) * 1e-3,
        chased=chased_remanence(scaling, index),
    )
