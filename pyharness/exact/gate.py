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


def stamped(stamp: int, before: int, drive: int) -> bool:
    """Whether a stamp is new, and from after the earliest time at which the pulse may have been on."""
    since_drive = check("gate.since_drive_us", (stamp - drive) % WRAP)
    return stamp != before and since_drive <= OLD


def take_stamp(state: Record, config: Record, stamp: int, cycle_start: int, i: int) -> tuple[int, int]:
    """Whether coil i is still pending, and its drive_us.

    A pulse that began more than 2^30 us ago is over; one that lies ahead by more than a period was commanded
    before the clock was set back: both then take a stamp of the present time.
    """
    drive, before = state["drive_us"][i], state["switch_off_us"][i]
    if not state["pending"][i]:
        return 0, drive
    since_start = check("gate.since_start_us", (cycle_start - drive) % WRAP)
    if not stamped(stamp, before, drive) and 2**30 < since_start < WRAP - config["period_us"]:
        drive = (cycle_start - 2**30) % WRAP
    return flag(not stamped(stamp, before, drive)), drive


def blanking(
    state: Record, config: Record, stamp: int, cycle_start: int, start: int, in_time: bool, on: int, i: int,
) -> Coil:
    """Coil i, its switch-off stamped with `stamp`, at the start of the sample.

    `on` tells that it carries current while the magnetometer samples.

    Only a sample in time (neither missing nor off its place in the cycle) can show that a switch-off is old.
    """
    age = (start - stamp) % WRAP
    fresh = stamp != state["switch_off_us"][i]
    pending, drive = take_stamp(state, config, stamp, cycle_start, i)
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
