"""Flights of which only what faults are judged by is kept: hundreds fit into memory."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from pyharness.controllers import Controller
from pyharness.loop import Flight, each_cycle, longest_first


@dataclass(frozen=True)
class Watched:
    """What is kept of a flight, a row for each cycle."""

    flight: Flight
    status: np.ndarray  # (cycles,) uint32
    mode: np.ndarray  # (cycles,) uint16
    ticks: np.ndarray  # (cycles, 3) int16, as commanded
    rate_deg_s: np.ndarray  # (cycles,) float32, true ‖ω‖

    def first(self, mode: int, start: int = 0) -> int | None:
        """The first cycle from `start` on that ends in this mode."""
        found = np.flatnonzero(self.mode[start:] == mode)
        return start + int(found[0]) if found.size else None

    def first_told(self, mask: int, start: int = 0) -> int | None:
        """The first cycle from `start` on with any of these status bits."""
        found = np.flatnonzero(self.status[start:] & np.uint32(mask))
        return start + int(found[0]) if found.size else None

    @property
    def dipole_a_m2(self) -> np.ndarray:
        """Largest commanded mean dipole of the three coils, (cycles,), A m²."""
        scaling = self.flight.scaling
        share = np.array(scaling.dipole_a_m2) / scaling.config["path"]["window_ticks"]
        return np.abs(self.ticks * share).max(axis=1)


def watch(flights: Sequence[Flight], controller: Controller, progress: Callable[[int], None] | None = None) -> list[Watched]:
    """Fly a batch. `progress(n)` is told of n more cycles flown, of all flights together."""
    order = longest_first(flights)
    n, longest = len(flights), flights[order[0]].cycles
    status, mode = np.zeros((longest, n), np.uint32), np.zeros((longest, n), np.uint16)
    ticks, rate = np.zeros((longest, n, 3), np.int16), np.zeros((longest, n), np.float32)
    for cycle in each_cycle([flights[i] for i in order], controller):
        row, on = cycle.number, len(cycle.outputs)
        status[row, :on], mode[row, :on], ticks[row, :on] = (cycle.outputs[name] for name in ("status", "mode", "ticks"))
        rate[row, :on] = np.degrees(np.sqrt((cycle.rate_rad_s**2).sum(axis=1)))
        if progress:
            progress(on)
    placed = {
        i: Watched(flights[i], *(values[: flights[i].cycles, place].copy() for values in (status, mode, ticks, rate)))
        for place, i in enumerate(order)
    }
    return [placed[i] for i in range(n)]
