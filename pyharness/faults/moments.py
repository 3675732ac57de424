"""When faults strike: moments of the nominal flight that differ in what the controller is doing."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from pyharness.exact import constants as mrd
from pyharness.faults.catalogue import FAULTS, Fault, Setting
from pyharness.faults.watch import Watched
from pyharness.loop import Flight
from pyharness.scaling import Scaling

PASSES_AFTER_S = 300.0
"""How long a fault that passes lasts."""
SETTLING_AGAIN_S = 900.0
"""What a flight may take longer than the nominal one, beside a dwell begun anew."""


@dataclass(frozen=True)
class Moment:
    """A moment of the nominal flight."""

    name: str
    cycle: int
    stays: bool = False  # the fault stays to the end


@dataclass(frozen=True)
class Case:
    """One fault at one moment."""

    fault: Fault
    moment: Moment
    setting: Setting
    flight: Flight


def moments(nominal: Watched) -> list[Moment]:
    """The moments of a nominal flight that settles. Raises ValueError for one that does not."""
    settled = nominal.first(mrd.MRD_MODE_SETTLED)
    if settled is None:
        raise ValueError("the flight without a fault does not settle, so nothing can be told of faults")
    scaling = nominal.flight.scaling
    damping = nominal.first(mrd.MRD_MODE_DAMPING)
    early = damping + round(30.0 / scaling.period_s)
    rate = nominal.rate_deg_s
    half_way = max(early + 1, int(np.argmax(rate < 0.5 * rate[0])))
    dwell = settled - scaling.config["supervisor"]["settle_dwell"] // 2
    after = settled + round(60.0 / scaling.period_s)
    return [
        Moment("early", early), Moment("half-way", half_way), Moment("in the dwell", dwell), Moment("settled", after),
        Moment("half-way, for good", half_way, stays=True),
    ]  # fmt: skip


def cases(nominal: Watched, names: frozenset[str] | None = None) -> Iterator[Case]:
    """Every fault of the list, or of these names, at every moment that makes sense for it."""
    at = {moment.name: moment for moment in moments(nominal)}
    scaling = nominal.flight.scaling
    for fault in FAULTS:
        if (names is not None and fault.name not in names) or not _applies(fault, scaling):
            continue
        for moment in _moments_of(fault, at):
            yield _case(fault, moment, nominal)


def _applies(fault: Fault, scaling: Scaling) -> bool:
    return scaling.mission.gyro is not None or not fault.name.startswith("GYRO")


def _moments_of(fault: Fault, at: dict[str, Moment]) -> list[Moment]:
    if fault.orbits:  # what only orbits tell: from early on, for good
        return [Moment("early, for good", at["early"].cycle, stays=True)]
    found = [moment for moment in at.values() if fault.lasting if moment.stays]
    return [moment for moment in at.values() if fault.passing and not moment.stays] + found


def _case(fault: Fault, moment: Moment, nominal: Watched) -> Case:
    flight, scaling = nominal.flight, nominal.flight.scaling
    spare_s = PASSES_AFTER_S + scaling.mission.control.dwell_s + SETTLING_AGAIN_S
    cycles = max(nominal.first(mrd.MRD_MODE_SETTLED), moment.cycle) + round(spare_s / scaling.period_s)
    setting = Setting(scaling, moment.cycle, 2**31)
    if fault.orbits:
        cycles = max(cycles, moment.cycle + round(_orbits(fault, scaling) * setting.orbit))
    if not moment.stays:
        setting = Setting(scaling, moment.cycle, moment.cycle + round(PASSES_AFTER_S / scaling.period_s))
    return Case(fault, moment, setting, fault.flight(replace(flight, cycles=cycles), setting))


def _orbits(fault: Fault, scaling: Scaling) -> float:
    """Negative: until the guard has used its retries, with half an orbit to spare."""
    if fault.orbits > 0:
        return fault.orbits
    supervisor = scaling.config["supervisor"]
    orbit = Setting(scaling, 0, 0).orbit
    trips = supervisor["retries"] + 1
    cycles = trips * (3 * supervisor["window_cycles"] + 4) + supervisor["retries"] * supervisor["pause_cycles"]
    return cycles / orbit + 0.5
