"""Which gain: the mission's own, or the recommended one, and how the two ways to state it convert.

Unit trap: K [N m s] and k [A m² s/T] are different quantities. K belongs to m = (K/‖B‖)(ω × b̂), k to m = k (ω × B); so
k = K / ‖B‖².
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from pyharness.mission import Mission
from pyharness.mission.orbit import equatorial_field_ut
from pyharness.plant.orbit import inclination_rad, orbital_rate, semi_major_axis_m


@dataclass(frozen=True)
class Gain:
    """One gain, both ways."""

    k_am2_s_per_t: float
    K_n_m_s: float
    rms_field_t: float
    origin: str  # where it came from, in words


def rms_field_t(mission: Mission) -> float:
    """Root-mean-square field on the orbit, T, of a centred dipole along the Earth's axis: B0 (a/r)³ √(1 + 1.5 sin² i).

    Mean of 1 + 3 sin² λ over a circular orbit, sin λ = sin i sin u.
    """
    sine = math.sin(inclination_rad(mission.orbit))
    equator_ut = equatorial_field_ut(semi_major_axis_m(mission.orbit) * 1e-3)
    return equator_ut * 1e-6 * math.sqrt(1.0 + 1.5 * sine * sine)


def recommended_gain_n_m_s(mission: Mission) -> float:
    """K = 2 n (1 + sin ξ) Jmin, with the inclination for the angle ξ to the magnetic equator.

    Avanzini & Giulietti, Journal of Guidance, Control, and Dynamics 35(4), 2012, 1326–1334 (formula from memory).
    """
    smallest = float(np.linalg.eigvalsh(np.array(mission.body.inertia_kg_m2))[0])
    return 2.0 * orbital_rate(mission.orbit) * (1.0 + math.sin(inclination_rad(mission.orbit))) * smallest


def gain_of(mission: Mission) -> Gain:
    """The gain that the mission file asks for."""
    control, rms = mission.control, rms_field_t(mission)
    if control.k_am2_s_per_t is not None:
        return Gain(control.k_am2_s_per_t, control.k_am2_s_per_t * rms * rms, rms, "control.k_am2_s_per_t")
    if control.K_n_m_s is not None:
        return Gain(control.K_n_m_s / (rms * rms), control.K_n_m_s, rms, "control.K_n_m_s")
    K = recommended_gain_n_m_s(mission)
    return Gain(K / (rms * rms), K, rms, "control.gain = auto")
