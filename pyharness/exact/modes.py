"""The modes: the command of a cycle before it senses, and one transition after."""

from __future__ import annotations

from pyharness.exact.constants import (
    MRD_COMMAND_ARM,
    MRD_COMMAND_BENCH,
    MRD_COMMAND_INHIBIT,
    MRD_COMMAND_NONE,
    MRD_COMMAND_RESUME,
    MRD_COMMAND_SAFE,
    MRD_MODE_BENCH,
    MRD_MODE_DAMPING,
    MRD_MODE_HOLD_OFF,
    MRD_MODE_INHIBIT,
    MRD_MODE_SAFE,
    MRD_MODE_SETTLED,
    MRD_S_COMMAND_REFUSED,
)
from pyharness.exact.num import Record, Vector, count
from pyharness.exact.ranges import UINT32_MAX

MODES = (
    MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING, MRD_MODE_SETTLED, MRD_MODE_SAFE, MRD_MODE_INHIBIT, MRD_MODE_BENCH,
)
NO_PULSE = (0, 0, 0)
COMMANDED = 65535  # in inhibit_commanded: no flipped bit makes it 0

_ACCEPTED_IN = {
    MRD_COMMAND_NONE: MODES,
    MRD_COMMAND_SAFE: MODES,
    MRD_COMMAND_INHIBIT: (MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING, MRD_MODE_SETTLED, MRD_MODE_INHIBIT),
    MRD_COMMAND_RESUME: (MRD_MODE_SAFE, MRD_MODE_INHIBIT, MRD_MODE_BENCH),
    MRD_COMMAND_ARM: (MRD_MODE_SAFE,),
    MRD_COMMAND_BENCH: (MRD_MODE_BENCH,),
}
# The mode that follows and inhibit_commanded. ARM leaves the latter: SAFE, where alone it is accepted, has
# cleared it.
_LEADS_TO = {
    MRD_COMMAND_SAFE: (MRD_MODE_SAFE, 0),
    MRD_COMMAND_INHIBIT: (MRD_MODE_INHIBIT, COMMANDED),
    MRD_COMMAND_RESUME: (MRD_MODE_HOLD_OFF, 0),
}


def accepted(mode: int, supervisor: Record, inputs: Record) -> bool:
    """Whether the command is accepted in this mode and with its values."""
    command = inputs["command"]
    if mode not in _ACCEPTED_IN.get(command, ()):
        return False
    if command == MRD_COMMAND_ARM:
        return inputs["command_key"] == supervisor["bench_key"]
    if command == MRD_COMMAND_BENCH:
        in_limits = 1 <= abs(inputs["command_ticks"]) <= supervisor["bench_limit_ticks"]
        return not inputs["low_power"] and inputs["command_coil"] <= 2 and in_limits
    return True


def obey(
    mode: int, inhibit_commanded: int, supervisor: Record, inputs: Record,
) -> tuple[int, int, Vector, int]:
    """Mode after the command, inhibit_commanded, the bench pulse, and the status bits.

    A value that is no mode counts as SAFE and becomes it.
    """
    command = inputs["command"]
    mode = mode if mode in MODES else MRD_MODE_SAFE
    if not accepted(mode, supervisor, inputs):
        return mode, inhibit_commanded, NO_PULSE, 1 << MRD_S_COMMAND_REFUSED
    if command == MRD_COMMAND_ARM:
        return MRD_MODE_BENCH, inhibit_commanded, NO_PULSE, 0
    if command == MRD_COMMAND_BENCH:
        pulse = tuple(inputs["command_ticks"] if i == inputs["command_coil"] else 0 for i in range(3))
        return mode, inhibit_commanded, pulse, 0
    mode, inhibit_commanded = _LEADS_TO.get(command, (mode, inhibit_commanded))
    return mode, inhibit_commanded, NO_PULSE, 0


def dwelling(towards: bool, dwell: int, needed: int, mode: int, following: int) -> tuple[int, int]:
    """Mode and dwell after one more cycle towards the mode that follows, or one that begins anew."""
    if not towards:
        return mode, 0
    dwell = count(dwell, UINT32_MAX)
    return (following, 0) if dwell >= needed else (mode, dwell)


def advance(
    mode: int, inhibit_commanded: int, dwell: int, supervisor: Record, inputs: Record, rate: int,
    rate_valid: int, fell_back: int,
) -> tuple[int, int]:
    """One transition by itself. Returns mode and dwell; a new mode begins with a dwell of 0.

    An estimate that fell back sees only the rate across the field: it can end the dwell towards SETTLED, not
    lengthen it.
    """
    low_power = inputs["low_power"]
    if mode == MRD_MODE_INHIBIT and not low_power and not inhibit_commanded:
        mode, dwell = MRD_MODE_HOLD_OFF, 0  # whose own rows follow in the same step
    if mode == MRD_MODE_HOLD_OFF:
        if low_power:
            return MRD_MODE_INHIBIT, 0
        if inputs["separation_s"] >= supervisor["hold_off_s"]:
            return MRD_MODE_DAMPING, 0
    elif mode == MRD_MODE_DAMPING:
        if low_power:
            return MRD_MODE_INHIBIT, 0
        slow = rate <= supervisor["settled_rate"]
        if rate_valid and not (slow and fell_back):
            return dwelling(slow, dwell, supervisor["settle_dwell"], mode, MRD_MODE_SETTLED)
    elif mode == MRD_MODE_SETTLED:
        if low_power:
            return MRD_MODE_INHIBIT, 0
        if rate_valid:
            fast = rate > supervisor["wake_rate"]
            return dwelling(fast, dwell, supervisor["wake_dwell"], mode, MRD_MODE_DAMPING)
    return mode, dwell
