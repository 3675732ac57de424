"""A flight as the reviewer reads it: the integers of a record in physical units and by name."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from pyharness.compare import Comparison
from pyharness.flight import Interface
from pyharness.loop import Record
from pyharness.mission import AXES
from pyharness.scaling import Q15, Scaling


@dataclass(frozen=True)
class Flown:
    """One flight, and how far its controller was from the truth. Arrays have a row for each cycle."""

    title: str  # "nominal tip-off"
    record: Record
    comparison: Comparison
    interface: Interface

    @property
    def scaling(self) -> Scaling:
        """The integers' sizes, and the mission."""
        return self.record.flight.scaling

    @property
    def cycles(self) -> int:
        """Cycles flown."""
        return len(self.record.time_s)

    def constant(self, name: str) -> int:
        """A constant of the header by its name without MRD_."""
        return self.interface.header.constants[f"MRD_{name}"]

    def bit(self, name: str) -> np.ndarray:
        """(cycles,) bool: the status bit of this name without MRD_S_ is set."""
        return self.record.bit(self.constant(f"S_{name}"))

    def bit_per_axis(self, name: str) -> np.ndarray:
        """(cycles, 3) bool of the three status bits name_X, name_Y, name_Z."""
        return np.stack([self.bit(f"{name}_{axis.upper()}") for axis in AXES], axis=1)

    @cached_property
    def driven(self) -> np.ndarray:
        """(cycles,) bool: the law's pulses left, in mode damping."""
        return self.record.outputs["mode"] == self.constant("MODE_DAMPING")

    @cached_property
    def saturated(self) -> np.ndarray:
        """(cycles, 3) bool: the demand on an axis was beyond its limit, and its pulses left."""
        return self.bit_per_axis("SATURATED") & self.driven[:, None]

    @cached_property
    def trusted(self) -> np.ndarray:
        """(cycles,) bool: the field sample was trusted."""
        return self.record.outputs["trace"]["gate"]["trusted"] != 0

    @cached_property
    def commanded_a_m2(self) -> np.ndarray:
        """(cycles, 3) mean dipole that the law asks for, after saturation, whatever the mode."""
        return (
            self.record.outputs["trace"]["saturation"]["command"] / Q15 * np.array(self.scaling.dipole_a_m2)
        )

    @cached_property
    def applied_a_m2(self) -> np.ndarray:
        """(cycles, 3) mean dipole of the pulses as they really were, at the nominal voltage."""
        coils = self.scaling.mission.coil
        full = np.array([coil.polarity * coil.dipole_a_m2 for coil in coils])
        timeline = self.scaling.timeline
        return self.record.applied_ticks * full * (timeline.tick_us / timeline.period_us)

    @cached_property
    def duty(self) -> np.ndarray:
        """(cycles, 3) part of the cycle that each coil was switched on."""
        timeline = self.scaling.timeline
        return np.abs(self.record.applied_ticks) * (timeline.tick_us / timeline.period_us)

    @cached_property
    def estimate_deg_s(self) -> np.ndarray:
        """(cycles,) rate estimate on board, NaN where there is none."""
        outputs = self.record.outputs
        rate = np.degrees(outputs["rate"] * self.scaling.rate_rad_s)
        return np.where(outputs["rate_valid"] != 0, rate, np.nan)

    @cached_property
    def dropped(self) -> np.ndarray:
        """(cycles, 3) bool: a pulse was too short to be made and was left out, in mode damping."""
        return self.bit_per_axis("SHORT_PULSE") & self.driven[:, None]

    @property
    def slow_deg_s(self) -> float:
        """‖ω‖ below which the mission counts its tumble as stopped."""
        return self.scaling.mission.control.settled_deg_s

    @cached_property
    def slow_at(self) -> int | None:
        """First cycle with the true ‖ω‖ below `slow_deg_s`, if there is one."""
        return first(self.record.true_rate_deg_s < self.slow_deg_s)

    @cached_property
    def settled_at(self) -> int | None:
        """First cycle with the handover flag, if there is one."""
        return first(self.record.outputs["handover"] != 0)

    def mode_spans(self) -> list[tuple[int, int, str]]:
        """(first cycle, end cycle, name) of each stretch in one mode."""
        mode = self.record.outputs["mode"]
        edges = [0, *(np.flatnonzero(np.diff(mode)) + 1).tolist(), len(mode)]
        return [
            (a, b, self.interface.mode_name(int(mode[a])))
            for a, b in zip(edges[:-1], edges[1:], strict=True)
            if b > a
        ]


def first(flags: np.ndarray) -> int | None:
    """Index of the first set flag, if there is one."""
    return int(np.argmax(flags)) if flags.any() else None
