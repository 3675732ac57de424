"""All faults at all moments: flown, judged, and told as a matrix."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from pyharness.controllers import Controller
from pyharness.faults.judge import Result, judge
from pyharness.faults.moments import Case
from pyharness.faults.watch import Watched, watch
from pyharness.loop import Flight, long_cycles
from pyharness.scaling import Scaling

BATCH = 64
"""Flights in one batch: one costs nearly as much as that many."""


@dataclass(frozen=True)
class Matrix:
    """What came of every case, and of the flight without a fault."""

    nominal: Watched
    results: tuple[Result, ...]

    @property
    def scaling(self) -> Scaling:
        """The integers flown."""
        return self.nominal.flight.scaling

    @property
    def failed(self) -> list[Result]:
        """The cases that are not as the list has them."""
        return [result for result in self.results if not result.passed]


def nominal_flight(scaling: Scaling, seed: int = 1) -> Flight:
    """The flight without a fault, long enough to settle."""
    return Flight(scaling, long_cycles(scaling), seed)


def fly_matrix(
    cases: Sequence[Case], nominal: Watched, controller: Controller, progress: Callable[[int], None] | None = None
) -> Matrix:
    """Fly and judge the cases. `progress(n)` is told of n more cycles flown, of all flights together."""
    results: dict[int, Result] = {}
    for batch in _batches(cases):
        flown = watch([cases[i].flight for i in batch], controller, progress)
        for i, one in zip(batch, flown, strict=True):
            results[i] = judge(cases[i], one, nominal)
    return Matrix(nominal, tuple(results[i] for i in range(len(cases))))


def _batches(cases: Sequence[Case]) -> list[list[int]]:
    """Cases of like length together: a batch costs as if all were as long as its longest."""
    batches: list[list[int]] = []
    for i in sorted(range(len(cases)), key=lambda i: -cases[i].flight.cycles):
        if batches and len(batches[-1]) < BATCH and cases[i].flight.cycles > 0.8 * cases[batches[-1][0]].flight.cycles:
            batches[-1].append(i)
        else:
            batches.append([i])
    return batches
