"""When something happens to a flight. Spans of cycles are [first, end)."""

from __future__ import annotations

from dataclasses import dataclass


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
class Moment:
    """Something that happens in one cycle."""

    cycle: int

    def covers(self, cycle: int) -> bool:
        """Whether it happens in this cycle."""
        return cycle == self.cycle
