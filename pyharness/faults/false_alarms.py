"""Does a guard trip where nothing is wrong? Nominal flights of the mission, varied in what nobody knows beforehand."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from pyharness.controllers import Controller
from pyharness.exact import constants as mrd
from pyharness.faults.moments import Setting
from pyharness.loop import Flight, each_cycle
from pyharness.mission import Mission, MissionError, load_mission
from pyharness.scaling import scale

BATCH = 500
ALARMS = ("DIVERGING", "NO_PROGRESS", "MAG_FROZEN", "MAG_DEAD_AXIS", "MAG_JUMP", "MAG_NOISY", "GYRO_FROZEN", "GYRO_DISAGREES")
"""Status bits that no flight without a fault should show; NO_PROGRESS may, where the orbit leaves an axis undamped."""


@dataclass(frozen=True)
class Alarms:
    """Flights flown, and how many of them showed each bit."""

    flights: int
    shown: dict[str, int]
    settled: int

    def bound(self, name: str) -> float:
        """Upper limit of the share of flights that show it, at 95 %: exact (Clopper & Pearson 1934) for none, 1 − 0.05^(1/n)."""
        if self.shown[name]:
            raise ValueError(f"{name}: shown in {self.shown[name]} flights, the bound is for none")
        return 1.0 - 0.05 ** (1.0 / self.flights)


def varied_flights(mission: Mission, runs: int, seed: int) -> Iterator[Flight]:
    """Flights with tip-off, attitude, orbit, inertia, gain, dipole and noise drawn anew; the same on every machine."""
    for run in range(runs):
        draw = _Draw(seed, run)
        while True:
            try:
                scaling = scale(load_mission(mission.source, _overrides(mission, draw)))
                break
            except MissionError:  # not a legal mission: draw again
                continue
        tip_off = mission.body.tip_off_deg_s
        size = math.hypot(*tip_off) * draw.between(0.2, 1.0)
        rate = _direction(draw, size)
        orbit = Setting(scaling, 0, 0).orbit
        flight = Flight(scaling, orbit + scaling.config["supervisor"]["window_cycles"] + 200, seed=run + 1, rate_deg_s=rate)
        yield replace(flight, along_field=draw.between(0, 1) < 0.1, supply_v=draw.between(mission.supply.min_v, mission.supply.max_v))


def count_alarms(
    mission: Mission, runs: int, controller: Controller, seed: int = 1, progress: Callable[[int], None] | None = None
) -> Alarms:
    """Fly them and count. `progress(n)` is told of n more flights."""
    shown = dict.fromkeys(ALARMS, 0)
    settled = 0
    flights = varied_flights(mission, runs, seed)
    for start in range(0, runs, BATCH):
        batch = sorted((next(flights) for _ in range(min(BATCH, runs - start))), key=lambda flight: -flight.cycles)
        seen, reached, done = np.zeros(len(batch), np.uint32), np.zeros(len(batch), bool), 0.0
        for cycle in each_cycle(batch, controller):
            on = len(cycle.outputs)
            seen[:on] |= cycle.outputs["status"]
            reached[:on] |= cycle.outputs["mode"] == mrd.MRD_MODE_SETTLED
            if progress and cycle.number % 100 == 99:
                now = len(batch) * (cycle.number + 1) / batch[0].cycles
                progress(int(now) - int(done))
                done = now
        for name in ALARMS:
            shown[name] += int((seen >> np.uint32(getattr(mrd, f"MRD_S_{name}")) & 1).sum())
        settled += int(reached.sum())
    return Alarms(runs, shown, settled)


class _Draw:
    """Numbers from the raw PCG64 stream: numpy's distributions carry no promise to stay as they are."""

    def __init__(self, *seed: int):
        self._stream = np.random.PCG64(seed)

    def between(self, low: float, high: float) -> float:
        """Even over [low, high), in steps of 2^-32 of it."""
        return low + (high - low) * (int(self._stream.random_raw()) >> 32) * 2.0**-32


def _direction(draw: _Draw, size: float) -> tuple[float, float, float]:
    """A vector of this size in a direction that is even over the sphere."""
    while True:
        v = tuple(draw.between(-1, 1) for _ in range(3))
        if 0.01 < math.hypot(*v) <= 1.0:
            return tuple(size * x / math.hypot(*v) for x in v)


def _overrides(mission: Mission, draw: _Draw) -> dict[str, Any]:
    J = mission.body.inertia_kg_m2
    residual = 2.0 * math.hypot(*mission.body.residual_dipole_a_m2)
    inertia = {f"{'xyz'[i]}{'xyz'[i]}": J[i][i] * draw.between(0.85, 1.15) for i in range(3)}
    inertia |= {"xy": J[0][1] * draw.between(-1, 1), "xz": J[0][2] * draw.between(-1, 1), "yz": J[1][2] * draw.between(-1, 1)}
    overrides: dict[str, Any] = {
        "body": {"inertia_kg_m2": inertia, "residual_dipole_a_m2": list(_direction(draw, draw.between(0, residual) + 1e-6))},
        "control": _gain(mission, draw.between(0.6, 1.6)),
    }
    if mission.orbit.two_line_elements is None:
        overrides["orbit"] = {
            "altitude_km": mission.orbit.altitude_km * draw.between(0.9, 1.15), "inclination_deg": draw.between(20.0, 120.0),
            "node_deg": draw.between(0.0, 360.0), "argument_of_latitude_deg": draw.between(0.0, 360.0),
        }  # fmt: skip
    return overrides


def _gain(mission: Mission, factor: float) -> dict[str, float]:
    for key in ("k_am2_s_per_t", "K_n_m_s"):
        if (value := getattr(mission.control, key)) is not None:
            return {key: value * factor}
    return {}
