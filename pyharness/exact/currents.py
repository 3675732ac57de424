"""Stage 3: does each coil carry the current that was commanded, and none while the magnetometer samples?"""

from __future__ import annotations

from typing import NamedTuple

from pyharness.exact.ballot import vote
from pyharness.exact.constants import (
    MRD_COIL_BACKWARD,
    MRD_COIL_OK,
    MRD_COIL_ON,
    MRD_COIL_WEAK,
    MRD_S_COIL_CURRENT,
)
from pyharness.exact.num import Record, Vector, bit
from pyharness.exact.ranges import check, check3


class Sensed(NamedTuple):
    """What the current sense finds of one coil; the ballots are the state's."""

    on: bool
    weak: Record
    backward: Record

    @property
    def fault(self) -> int:
        """The first that applies of MRD_COIL_*."""
        if self.on:
            return MRD_COIL_ON
        if self.backward["tripped"]:
            return MRD_COIL_BACKWARD
        return MRD_COIL_WEAK if self.weak["tripped"] else MRD_COIL_OK


def sense_coil(state: Record, config: Record, inputs: Record, i: int) -> Sensed:
    """Coil i by its current at the end of the last pulse, if that was long enough, and during the sample."""
    weak, backward = state["weak"][i], state["backward"][i]
    if not inputs["current_valid"]:
        return Sensed(False, weak, backward)
    off_max = config["current_off_max"]
    on = abs(inputs["current_sampled"][i]) > off_max
    pulse, driven = state["ticks"][i], inputs["current_driven"][i]
    if abs(pulse) >= config["current_ticks"]:
        along = check("currents.along", driven if pulse > 0 else -driven)
        backward = vote(backward, along < -off_max)
        weak = vote(weak, -off_max <= along < config["current_min"][i])
    return Sensed(on, weak, backward)


def judge(state: Record, config: Record, inputs: Record) -> tuple[Record, Vector, Record, int]:
    """All coils, where the sense is fitted.

    Returns the trace's part, which coils are on, what the state keeps of the coils, and the status bits.
    """
    if not config["current_fitted"]:
        return {"fault": (0, 0, 0)}, (0, 0, 0), {}, 0
    x, y, z = (sense_coil(state, config, inputs, i) for i in range(3))
    fault = check3("currents.fault", (x.fault, y.fault, z.fault))
    ballots = {
        "weak": (x.weak, y.weak, z.weak),
        "backward": (x.backward, y.backward, z.backward),
    }
    return {"fault": fault}, (x.on, y.on, z.on), ballots, bit(fault != (0, 0, 0), MRD_S_COIL_CURRENT)
