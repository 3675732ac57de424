"""What must hold of faults and flipped bits before anyone signs; only where they were flown."""

from __future__ import annotations

from collections.abc import Sequence

from pyharness.faults.bits import Tally
from pyharness.review.checks import Check
from pyharness.review.faults import FaultsFlown


def fault_checks(faults: FaultsFlown) -> list[Check]:
    """All checks of faults. Nothing flown, or nothing flipped, shows nothing: it fails."""
    return [
        _as_declared(faults),
        _caught(faults),
        _forgotten(faults),
        _no_wild_pulse(faults),
    ]


def _as_declared(faults: FaultsFlown) -> Check:
    flown, failed = len(faults.matrix.results), len(faults.matrix.failed)
    return Check(
        "Every fault ended as declared", flown > 0 and failed == 0,
        f"{flown - failed} of {flown} flights with {len(faults.rows)} faults",
    )  # fmt: skip


def _caught(faults: FaultsFlown) -> Check:
    tallies = faults.tallies_of("state", "config")
    caught = sum(tally.caught for tally in tallies)
    return _flips("Every flipped bit of state and configuration caught in the same cycle", tallies, f"{caught} of {_tried(tallies)}")


def _forgotten(faults: FaultsFlown) -> Check:
    tallies = faults.tallies_of("inputs")
    lasting = sum(tally.lasting for tally in tallies)
    longest = max((tally.longest for tally in tallies), default=0)
    return _flips(
        "Every flipped bit of the inputs forgotten", tallies,
        f"{_tried(tallies) - lasting} of {_tried(tallies)}, after at most {longest} cycles",
    )  # fmt: skip


def _flips(name: str, tallies: Sequence[Tally], figure: str) -> Check:
    wrong = [f"{tally.moment}, {tally.part}, {example}" for tally in tallies for example in tally.examples]
    return Check(name, _tried(tallies) > 0 and not wrong, "; ".join([figure, *wrong]))


def _no_wild_pulse(faults: FaultsFlown) -> Check:
    tried, wild = _tried(faults.tallies), sum(tally.wild for tally in faults.tallies)
    return Check("No pulse beyond a limit, or from a mode that makes none, after a flip", tried > 0 and wild == 0, f"{wild} in {tried} flips")


def _tried(tallies: Sequence[Tally]) -> int:
    return sum(tally.tried for tally in tallies)
