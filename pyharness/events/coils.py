"""What happens to coils, their drivers and their stamps."""

from __future__ import annotations

from dataclasses import dataclass

from pyharness.events.span import Span


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
class SickCoil(Span):
    """A coil does not do what it is told.

    `current`: what its driver makes of the command, 0 for an open circuit, −1 for a driver the wrong way round. `leads`: −1 where
    the leads are reversed, which no current shows. `held`: part of the full dipole that is on all the time, in place of any pulse.
    """

    coil: int = 0
    current: float = 1.0
    leads: float = 1.0
    held: float = 0.0


@dataclass(frozen=True)
class SwapCoils(Span):
    """Two coils hang on each other's drivers."""

    coils: tuple[int, int] = (0, 1)


@dataclass(frozen=True)
class StaysOn(Span):
    """A coil is not switched off after its next pulse, hence not stamped either: it stays on up to the sample of `end`, and is stamped after."""

    coil: int = 0
