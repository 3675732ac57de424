"""What happens to a flight from outside: dropped samples, late switch-offs, commands, kicks. Spans of cycles are [first, end)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pyharness.mission.model import Vector


@dataclass(frozen=True)
class Span:
    """Something that lasts from cycle `first` up to, and without, cycle `end`; every `every` cycles."""

    first: int
    end: int
    every: int = 1

    def covers(self, cycle: int) -> bool:
        """Whether it happens in this cycle."""
        return self.first <= cycle < self.end and (cycle - self.first) % self.every == 0


@dataclass(frozen=True)
class DropSample(Span):
    """The host has no field sample."""


@dataclass(frozen=True)
class DropGyro(Span):
    """The host has no gyro sample."""


@dataclass(frozen=True)
class LateSwitchOff(Span):
    """A coil's driver switches off `ticks` late."""

    coil: int = 0
    ticks: int = 0


@dataclass(frozen=True)
class LoseStamps(Span):
    """The host does not stamp what is switched off; afterwards it stamps every coil, which is off, at the start of the cycle."""


@dataclass(frozen=True)
class LateStamps(Span):
    """The host hands the stamps of a cycle in one cycle late."""


@dataclass(frozen=True)
class Jitter(Span):
    """The sample is taken, and stamped, off its nominal time by up to ±`us`, drawn anew each cycle."""

    us: int = 0


@dataclass(frozen=True)
class LowPower(Span):
    """The host's low-power flag is set."""


@dataclass(frozen=True)
class Moment:
    """Something that happens in one cycle."""

    cycle: int

    def covers(self, cycle: int) -> bool:
        """Whether it happens in this cycle."""
        return cycle == self.cycle


@dataclass(frozen=True)
class Command(Moment):
    """One command."""

    code: int
    key: int = 0
    coil: int = 0
    ticks: int = 0


@dataclass(frozen=True)
class Kick(Moment):
    """An impulse: at mid-sample the body rate becomes this."""

    rate_deg_s: Vector


Event = DropSample | DropGyro | LateSwitchOff | LoseStamps | LateStamps | Jitter | LowPower | Command | Kick


def jitter_us(event: Jitter, cycle: int) -> int:
    """The departure of one cycle, the same on every machine."""
    word = int(np.random.PCG64((event.first, cycle)).random_raw())
    return word % (2 * event.us + 1) - event.us
