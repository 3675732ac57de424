"""A log, replayed: what a controller answers to it. There is no plant; the state starts at reset."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from pyharness.controllers import Controller
from pyharness.flight import Interface
from pyharness.replay.clock import elapsed_s
from pyharness.replay.log import Log
from pyharness.scaling import Q15, Scaling

_CHUNK = 500
"""Rows between two reports of progress."""


@dataclass(frozen=True)
class Replayed:
    """A log and the answers to it. Arrays have a row for each cycle."""

    log: Log
    scaling: Scaling
    interface: Interface
    controller: str  # its name
    outputs: np.ndarray  # (rows,) records mrd_outputs

    @property
    def rows(self) -> int:
        """Cycles replayed."""
        return len(self.outputs)

    @cached_property
    def time_s(self) -> np.ndarray:
        """(rows,) start of each cycle after that of the first."""
        return elapsed_s(self.log.inputs["path"]["cycle_start_us"], self.scaling.timeline.period_us)

    @property
    def trusted(self) -> np.ndarray:
        """(rows,) bool: the field sample was trusted."""
        return self.outputs["trace"]["gate"]["trusted"] != 0

    @cached_property
    def damping(self) -> np.ndarray:
        """(rows,) bool: the law's pulses left."""
        return self.outputs["mode"] == self.interface.header.constants["MRD_MODE_DAMPING"]

    @property
    def estimate_deg_s(self) -> np.ndarray:
        """(rows,) rate estimate, NaN where there is none."""
        rate = np.degrees(self.outputs["rate"] * self.scaling.rate_rad_s)
        return np.where(self.outputs["rate_valid"] != 0, rate, np.nan)

    @property
    def field_ut(self) -> np.ndarray:
        """(rows,) norm of the calibrated field, NaN without a sample."""
        field = self.outputs["trace"]["calibration"]["field"].astype(float)
        norm = np.sqrt((field**2).sum(axis=1)) * self.scaling.field_t * 1e6
        return np.where(self.log.inputs["path"]["mag_valid"] != 0, norm, np.nan)

    @property
    def commanded_a_m2(self) -> np.ndarray:
        """(rows, 3) mean dipole that the law asks for, after saturation, whatever the mode."""
        return self.outputs["trace"]["saturation"]["command"] / Q15 * np.array(self.scaling.dipole_a_m2)

    @property
    def pulses_ms(self) -> np.ndarray:
        """(rows, 3) pulses that leave, signed."""
        return self.outputs["ticks"] * (self.scaling.timeline.tick_us * 1e-3)

    @cached_property
    def saturated(self) -> np.ndarray:
        """(rows, 3) bool: the demand on an axis was beyond its limit, and the law's pulses left."""
        bits = [self.bit(self.interface.header.constants[f"MRD_S_SATURATED_{axis}"]) for axis in "XYZ"]
        return np.stack(bits, axis=1) & self.damping[:, None]

    def bit(self, number: int) -> np.ndarray:
        """(rows,) bool: this bit of the status word is set."""
        return (self.outputs["status"] >> np.uint32(number) & 1).astype(bool)

    def bits_seen(self) -> list[tuple[int, str]]:
        """(number, name) of every status bit that is set in some row, lowest first."""
        seen = int(np.bitwise_or.reduce(self.outputs["status"]))
        return [
            (number, name)
            for number, name in sorted(self.interface.header.named("MRD_S_").items())
            if seen >> number & 1
        ]

    def modes_entered(self) -> list[tuple[int, str]]:
        """(first row, name) of each stretch in one mode."""
        mode = self.outputs["mode"]
        return [
            (row, self.interface.mode_name(int(mode[row])))
            for row in [0, *(np.flatnonzero(np.diff(mode)) + 1).tolist()]
        ]


def replay(
    log: Log, scaling: Scaling, controller: Controller, progress: Callable[[int], None] | None = None
) -> Replayed:
    """Feed a log to a controller from reset on. `progress(n)` is told of n more rows. Raises ControllerError if it is refused."""
    controller.configure([scaling])
    parts = []
    for start in range(0, len(log.inputs), _CHUNK):
        parts.append(controller.run(log.inputs[start : start + _CHUNK]))
        if progress:
            progress(len(parts[-1]))
    return Replayed(log, scaling, controller.interface, controller.name, np.concatenate(parts))
