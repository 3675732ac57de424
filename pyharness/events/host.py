"""What happens to the host computer: its clock, its flags, its commands, its memory."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from pyharness.events.span import Moment, Span
from pyharness.mission.model import Vector


@dataclass(frozen=True)
class Jitter(Span):
    """The sample is taken, and stamped, off its nominal time by up to ±`us`, drawn anew each cycle."""

    us: int = 0

    def offset_us(self, cycle: int) -> int:
        """The departure of one cycle, the same on every machine."""
        word = int(np.random.PCG64((self.first, cycle)).random_raw())
        return word % (2 * self.us + 1) - self.us


@dataclass(frozen=True)
class ShiftSample(Span):
    """The sample is taken, and stamped, `us` late; early, if negative."""

    us: int = 0

    def offset_us(self, cycle: int) -> int:
        """The departure of every cycle."""
        return self.us


@dataclass(frozen=True)
class RepeatInputs(Span):
    """The host hands in the inputs of the cycle before once more."""


@dataclass(frozen=True)
class SetClock(Moment):
    """The host's clock is set forward by `us`, back if negative. Stamps that were taken stay as they are."""

    us: int = 0


@dataclass(frozen=True)
class LowPower(Span):
    """The host's low-power flag is set."""


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


@dataclass(frozen=True)
class FlipBit(Moment):
    """One bit of the controller's memory, or of its inputs, flips. `column` as `records.columns` names it."""

    part: Literal["state", "config", "inputs"]
    column: str
    bit: int


@dataclass(frozen=True)
class RestartController(Moment):
    """The host restarts and resets the controller; it stamps every coil, which is off, at the start of the cycle."""


@dataclass(frozen=True)
class ForceMode(Moment):
    """The mode becomes this value, and the state's digest goes with it: software that writes where it should not."""

    mode: int
