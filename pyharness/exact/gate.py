"""Stage 4: is the sample at its place in the cycle, and old enough after every coil's switch-off?"""

from __future__ import annotations

from typing import NamedTuple

from pyharness.exact.constants import (
    MRD_S_BLANKED,
    MRD_S_SAMPLE_MISSING,
    MRD_S_SAMPLE_OFF_TIME,
    MRD_S_SWITCH_OFF_UNSTAMPED,
)
from pyharness.exact.num import WRAP, Record, Vector, bit, flag
from pyharness.exact.ranges import check, check3

OLD = 2**31 - 1  # the greatest age; one that has grown beyond it is saturated
_MISSING = 1 << MRD_S_SAMPLE_MISSING


def off_time(config: Record, inputs: Record) -> bool:
    """Whether mid-sample departs from its place in the cycle by more than the tolerance."""
    place = inputs["cycle_start_us"] + config["phase_us"]
    departure = check("gate.departure", (inputs["sample_us"] - place) % WRAP)
    tolerance = config["tolerance_us"]
    return not (departure <= tolerance or departure >= WRAP - tolerance)


class Coil(NamedTuple):
    """What the gate finds of one coil; the last three are the state's."""

    age_us: int
    clear: int
    unstamped: int
    off_clear: int
    pending: int
    drive_us: int


def earliest_stamp(state: Record, cycle_start: int, i: int) -> int:
    """drive_us of coil i, moved to 2^30 us ago in two cases, so that a stamp of the present time is taken.

    A pulse that began longer ago is over; one that lies ahead was commanded before the clock was set back.
    """
    since_start = check("gate.since_start_us", (cycle_start - state["drive_us"][i]) % WRAP)
    if state["pending"][i] and since_start > 2**30:
        return (cycle_start - 2**30) % WRAP
    return state["drive_us"][i]


def blanking(
    state: Record, config: Record, stamp: int, cycle_start: int, start: int, in_time: bool, on: int, i: int,
) -> Coil:
    """Coil i, its switch-off stamped with `stamp`, at the start of the sample.

    `on` tells that it carries current while the magnetometer samples.

    Only a sample in time (neither missing nor off its place in the cycle) can show that a switch-off is old.
    """
    age = (start - stamp) % WRAP
    fresh = stamp != state["switch_off_us"][i]
    drive = earliest_stamp(state, cycle_start, i)
    since_drive = check("gate.since_drive_us", (stamp - drive) % WRAP)
    stamped = fresh and since_drive <= OLD
    pending = flag(state["pending"][i] and not stamped)
    if not state["off_known"]:
        return Coil(age, clear=0, unstamped=0, off_clear=0, pending=pending, drive_us=drive)
    if pending:
        return Coil(age, clear=0, unstamped=1, off_clear=0, pending=1, drive_us=drive)
    if on:
        return Coil(age, clear=0, unstamped=0, off_clear=0, pending=0, drive_us=drive)
    was_clear = not fresh and state["off_clear"][i]
    if was_clear and age > OLD:
        return Coil(OLD, clear=1, unstamped=0, off_clear=1, pending=0, drive_us=drive)
    # An age of 2^31 or more: switched off after the start of the sample.
    clear = flag(config["blanking_us"][i] <= age <= OLD)
    return Coil(age, clear, 0, flag(was_clear or (clear and in_time)), pending=0, drive_us=drive)


def admit(
    state: Record, config: Record, inputs: Record, on: Vector, status: int,
) -> tuple[Vector, Record, int]:
    """Place in the cycle and blanking; `on` tells which coils carry current while the magnetometer samples.

    Returns the age of each switch-off, what the state keeps of the coils, and the status bits of this stage.
    """
    raised = 0
    if status & _MISSING:
        start = inputs["cycle_start_us"]
    else:
        start = (inputs["sample_us"] - config["half_sample_us"]) % WRAP
        raised = bit(off_time(config, inputs), MRD_S_SAMPLE_OFF_TIME)
    in_time = not (status & _MISSING or raised)
    off_x, off_y, off_z = inputs["switch_off_us"]
    begin = inputs["cycle_start_us"]
    x = blanking(state, config, off_x, begin, start, in_time, on[0], 0)
    y = blanking(state, config, off_y, begin, start, in_time, on[1], 1)
    z = blanking(state, config, off_z, begin, start, in_time, on[2], 2)
    raised |= bit(x.unstamped or y.unstamped or z.unstamped, MRD_S_SWITCH_OFF_UNSTAMPED)
    raised |= bit(not (x.clear and y.clear and z.clear or status & _MISSING), MRD_S_BLANKED)
    coils = {
        "switch_off_us": inputs["switch_off_us"],
        "off_known": 1,
        "off_clear": (x.off_clear, y.off_clear, z.off_clear),
        "pending": (x.pending, y.pending, z.pending),
        "drive_us": (x.drive_us, y.drive_us, z.drive_us),
    }
    return check3("gate.age_us", (x.age_us, y.age_us, z.age_us)), coils, raised
