"""What happens to a flight from outside: dropped samples, late switch-offs, commands, kicks, faults of every kind."""

from __future__ import annotations

from pyharness.events.coils import LateStamps, LateSwitchOff, LoseStamps, SickCoil, StaysOn, SwapCoils
from pyharness.events.host import (
    Command,
    FlipBit,
    ForceMode,
    Jitter,
    Kick,
    LowPower,
    RepeatInputs,
    RestartController,
    SetClock,
    ShiftSample,
)
from pyharness.events.sensors import (
    AddCounts,
    AddNoise,
    CountsEvent,
    DropGyro,
    DropSample,
    HoldCounts,
    ScaleCounts,
    SetAxis,
    SwapBytes,
)
from pyharness.events.span import Moment, Span

Event = Span | Moment

__all__ = [
    "AddCounts", "AddNoise", "Command", "CountsEvent", "DropGyro", "DropSample", "Event", "FlipBit", "ForceMode", "HoldCounts", "Jitter",
    "Kick", "LateStamps", "LateSwitchOff", "LoseStamps", "LowPower", "Moment", "RepeatInputs", "RestartController", "ScaleCounts",
    "SetAxis", "SetClock", "ShiftSample", "SickCoil", "Span", "StaysOn", "SwapBytes", "SwapCoils",
]  # fmt: skip
