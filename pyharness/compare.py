"""How far a flown controller was from the truth, cycle by cycle, beside the bound that the arithmetic promises."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pyharness.exact import constants as mrd
from pyharness.scaling import Q15, Scaling
from pyharness.truth import Truth


@dataclass(frozen=True)
class Comparison:
    """Distance from the truth over a run; arrays (cycles, 3), zero where no law acted."""

    active: np.ndarray  # (cycles,) bool: a law acted
    command: np.ndarray  # the truth's command, command counts
    command_error: np.ndarray  # |controller − truth|, command counts
    command_bound: np.ndarray  # the largest that it may be
    ticks_error: np.ndarray  # |controller − truth|, ticks; 0 for a dropped short pulse
    ticks_bound: np.ndarray
    dipole_a_m2: np.ndarray  # (3,) mean dipole over the cycle at full command

    @property
    def command_error_a_m2(self) -> np.ndarray:
        """|controller − truth| as mean dipole over the cycle, A m²."""
        return self.command_error / Q15 * self.dipole_a_m2

    @property
    def command_bound_a_m2(self) -> np.ndarray:
        """The largest that it may be, A m²."""
        return self.command_bound / Q15 * self.dipole_a_m2

    @property
    def used(self) -> float:
        """Largest share of the command's bound that was used; above 1 the controller is wrong."""
        share = self.command_error / np.where(self.command_bound > 0, self.command_bound, np.inf)
        return float(share.max(initial=0.0))

    @property
    def used_ticks(self) -> float:
        """Largest share of the ticks' bound that was used."""
        share = self.ticks_error / np.where(self.ticks_bound > 0, self.ticks_bound, np.inf)
        return float(share.max(initial=0.0))

    @property
    def within(self) -> bool:
        """Whether the controller stayed within the bound in every cycle."""
        return self.used <= 1.0 and self.used_ticks <= 1.0


def compare_with_truth(scaling: Scaling, inputs: np.ndarray, outputs: np.ndarray) -> Comparison:
    """Follow one controller's run with the truth: inputs and outputs (cycles,) records."""
    truth = Truth([scaling])
    steps = [truth.step(inputs[i : i + 1], outputs[i : i + 1]) for i in range(len(inputs))]
    stacked = {
        name: np.array([getattr(step, name)[:, 0] for step in steps]).reshape(-1, 3)
        for name in ("command", "command_bound", "ticks", "ticks_bound")
    }
    short = (mrd.MRD_S_SHORT_PULSE_X, mrd.MRD_S_SHORT_PULSE_Y, mrd.MRD_S_SHORT_PULSE_Z)
    dropped = np.stack([outputs["status"] >> np.uint32(bit) & 1 for bit in short], axis=1).astype(bool)
    # The pulses that the law asks for, in any mode.
    ticks_error = np.where(dropped, 0.0, np.abs(outputs["trace"]["pulses"]["ticks"] - stacked["ticks"]))
    return Comparison(
        active=np.array([step.active[0] for step in steps], dtype=bool),
        command=stacked["command"],
        command_error=np.abs(outputs["trace"]["saturation"]["command"] - stacked["command"]),
        command_bound=stacked["command_bound"],
        ticks_error=ticks_error,
        ticks_bound=stacked["ticks_bound"],
        dipole_a_m2=np.array(scaling.dipole_a_m2),
    )
