"""The modes: the command of a cycle before it senses, and one transition after."""

from __future__ import annotations

from typing import NamedTuple

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
    MRD_MODE_PAUSE,
    MRD_MODE_SAFE,
    MRD_MODE_SETTLED,
    MRD_S_COMMAND_REFUSED,
)
from pyharness.exact.num import UINT16_MAX, Record, Vector, count
from pyharness.exact.ranges import UINT32_MAX

MODES = (
    MRD_MODE_HOLD_OFF,
    MRD_MODE_DAMPING,
    MRD_MODE_SETTLED,
    MRD_MODE_SAFE,
    MRD_MODE_INHIBIT,
    MRD_MODE_BENCH,
    MRD_MODE_PAUSE,
)
NO_PULSE = (0, 0, 0)
COMMANDED = 65535  # in inhibit_commanded: no flipped bit makes it 0
SEPARATED = 2  # cycles in a row in which the separation time is reached: no single flipped bit ends hold-off

_ACCEPTED_IN = {
    MRD_COMMAND_NONE: MODES,
    MRD_COMMAND_SAFE: MODES,
    MRD_COMMAND_INHIBIT: (
        MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING, MRD_MODE_SETTLED, MRD_MODE_PAUSE, MRD_MODE_INHIBIT),
    MRD_COMMAND_RESUME: (MRD_MODE_SAFE, MRD_MODE_INHIBIT, MRD_MODE_BENCH, MRD_MODE_PAUSE),
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


class Seen(NamedTuple):
    """What a cycle has found that a transition looks at."""

    rate: int
    rate_valid: int
    fell_back: int
    diverging: int


class Standing(NamedTuple):
    """What a transition changes: the mode, its dwell, and how often the damping diverged."""

    mode: int
    dwell: int
    trips: int


def dwelling(now: Standing, towards: bool, needed: int, following: int, waits: int = 0) -> Standing:
    """After one more cycle towards the mode that follows, or one that begins the dwell anew.

    Where it waits, the dwell counts all the same.
    """
    if not towards:
        return now._replace(dwell=0)
    dwell = count(now.dwell, UINT32_MAX)
    if dwell >= needed and not waits:
        return now._replace(mode=following, dwell=0)
    return now._replace(dwell=dwell)


def _from_hold_off(now: Standing, supervisor: Record, inputs: Record) -> Standing:
    if inputs["low_power"]:
        return now._replace(mode=MRD_MODE_INHIBIT, dwell=0)
    separated = inputs["separation_s"] >= supervisor["hold_off_s"]
    return dwelling(now, separated, SEPARATED, MRD_MODE_DAMPING)


def _from_damping(now: Standing, supervisor: Record, inputs: Record, seen: Seen) -> Standing:
    """An estimate that fell back sees only the rate across the field: it can end the dwell, not add to it."""
    if inputs["low_power"]:
        return now._replace(mode=MRD_MODE_INHIBIT, dwell=0)
    if seen.diverging:
        mode = MRD_MODE_PAUSE if now.trips < supervisor["retries"] else MRD_MODE_SAFE
        return Standing(mode, 0, count(now.trips, UINT16_MAX))
    slow = seen.rate <= supervisor["settled_rate"]
    if not seen.rate_valid or (slow and seen.fell_back):
        return now
    after = dwelling(now, slow, supervisor["settle_dwell"], MRD_MODE_SETTLED)
    return after._replace(trips=0) if after.mode == MRD_MODE_SETTLED else after


def _from_settled(now: Standing, supervisor: Record, inputs: Record, seen: Seen) -> Standing:
    """No pulse leaves, so low power changes nothing; but waking waits for its end."""
    if not seen.rate_valid:
        return now
    fast = seen.rate > supervisor["wake_rate"]
    return dwelling(now, fast, supervisor["wake_dwell"], MRD_MODE_DAMPING, waits=inputs["low_power"])


def advance(
    now: Standing, inhibit_commanded: int, supervisor: Record, inputs: Record, seen: Seen,
) -> Standing:
    """One transition by itself; a new mode begins with a dwell of 0."""
    if now.mode == MRD_MODE_INHIBIT and not inputs["low_power"] and not inhibit_commanded:
        # HOLD_OFF's own rows follow in the same step.
        return _from_hold_off(now._replace(mode=MRD_MODE_HOLD_OFF, dwell=0), supervisor, inputs)
    if now.mode == MRD_MODE_HOLD_OFF:
        return _from_hold_off(now, supervisor, inputs)
    if now.mode == MRD_MODE_DAMPING:
        return _from_damping(now, supervisor, inputs, seen)
    if now.mode == MRD_MODE_SETTLED:
        return _from_settled(now, supervisor, inputs, seen)
    if now.mode == MRD_MODE_PAUSE:
        return dwelling(now, True, supervisor["pause_cycles"], MRD_MODE_HOLD_OFF)
    return now
