"""Stage 3: is the sample at its place in the cycle, and old enough after every coil's switch-off?"""

from __future__ import annotations

from pyharness.exact.constants import (
    MRD_S_BLANKED,
    MRD_S_FIELD_IMPLAUSIBLE,
    MRD_S_MAG_RANGE,
    MRD_S_SAMPLE_MISSING,
    MRD_S_SAMPLE_OFF_TIME,
    MRD_S_SWITCH_OFF_UNSTAMPED,
)
from pyharness.exact.num import WRAP, Record, Vector, bit, flag
from pyharness.exact.ranges import check, check3

OLD = 2**31 - 1  # an age that is saturated: the stamp may have wrapped since
_MISSING = 1 << MRD_S_SAMPLE_MISSING
_NORM = 1 << MRD_S_FIELD_IMPLAUSIBLE
_REJECTED = _MISSING | 1 << MRD_S_MAG_RANGE | 1 << MRD_S_SAMPLE_OFF_TIME | 1 << MRD_S_BLANKED


def off_time(config: Record, inputs: Record) -> bool:
    """Whether mid-sample departs from its place in the cycle by more than the tolerance."""
    place = inputs["cycle_start_us"] + config["phase_us"]
    departure = check("gate.departure", (inputs["sample_us"] - place) % WRAP)
    tolerance = config["tolerance_us"]
    return not (departure <= tolerance or departure >= WRAP - tolerance)


def blanking(
    state: Record, config: Record, switch_off_us: Vector, start: int, i: int,
) -> tuple[int, int, bool]:
    """Coil i at the start of the sample.

    Returns the age of its switch-off, the flag clear, and whether it is unstamped.
    """
    age = (start - switch_off_us[i]) % WRAP
    if not state["off_known"]:
        return age, 0, False
    if switch_off_us[i] == state["switch_off_us"][i]:
        if state["ticks"][i] != 0:
            return age, 0, True
        if state["off_clear"][i]:
            return OLD, 1, False
    # An age of 2^31 or more: switched off after the start of the sample.
    return age, flag(config["blanking_us"][i] <= age <= OLD), False


def admit(
    state: Record, config: Record, inputs: Record, status: int, waive_norm: int,
) -> tuple[Record, Vector, int]:
    """Whether the sample is used.

    Returns the trace's part, the state's off_clear, and the status bits of this stage.
    """
    raised = 0
    if status & _MISSING:
        start = inputs["cycle_start_us"]
    else:
        start = (inputs["sample_us"] - config["half_sample_us"]) % WRAP
        raised = bit(off_time(config, inputs), MRD_S_SAMPLE_OFF_TIME)
    switch_off_us = inputs["switch_off_us"]
    age_x, clear_x, unstamped_x = blanking(state, config, switch_off_us, start, 0)
    age_y, clear_y, unstamped_y = blanking(state, config, switch_off_us, start, 1)
    age_z, clear_z, unstamped_z = blanking(state, config, switch_off_us, start, 2)
    raised |= bit(unstamped_x or unstamped_y or unstamped_z, MRD_S_SWITCH_OFF_UNSTAMPED)
    raised |= bit(not (clear_x and clear_y and clear_z) and not status & _MISSING, MRD_S_BLANKED)
    disqualifying = _REJECTED if waive_norm else _REJECTED | _NORM
    trace = {
        "age_us": check3("gate.age_us", (age_x, age_y, age_z)),
        "trusted": flag(not (status | raised) & disqualifying),
    }
    return trace, (clear_x, clear_y, clear_z), raised
