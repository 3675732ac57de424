"""The faults as the reviewer reads them: a matrix of outcomes, declared beside measured, and what flipped bits did."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass
from functools import cached_property
from itertools import groupby

from pyharness.exact import constants as mrd
from pyharness.faults import FAULTS, Fault, Matrix, Outcome, Result
from pyharness.faults.bits import Tally
from pyharness.faults.judge import AS_WITHOUT_S
from pyharness.faults.moments import PASSES_AFTER_S
from pyharness.flight.header import Header


@dataclass(frozen=True)
class Ending:
    """How an outcome is written."""

    cell: str  # in the matrix, with a place for its seconds where it has them
    word: str  # where it is declared
    means: str  # in the legend


ENDINGS = {
    Outcome.AS_WITHOUT: Ending("as without", "as without", f"settles within {AS_WITHOUT_S:.0f} s of the flight without the fault"),
    Outcome.LATER: Ending("+{:.0f} s", "later", "settles so much later"),
    Outcome.DAMPED: Ending("damped", "damped", "the tumble is stopped, but not handed over"),
    Outcome.HELD: Ending("held", "held", "the coils are off for as long as the fault lasts"),
    Outcome.SAFE: Ending("safe in {:.0f} s", "safe", "so long after the onset in mode safe, coils off, until commanded"),
    Outcome.TOLD: Ending("told", "told", "not stopped, and a status bit tells"),
    Outcome.UNSEEN: Ending("not seen", "not seen", "not stopped, and no status bit tells"),
}


@dataclass(frozen=True)
class Cell:
    """An outcome in the matrix or its legend."""

    outcome: Outcome
    text: str
    passed: bool = True

    @property
    def style(self) -> str:
        """The class of its colour."""
        return self.outcome.name.lower().replace("_", "-")


LEGEND = tuple((Cell(outcome, ending.cell.replace("{:.0f}", "n")), ending.means) for outcome, ending in ENDINGS.items())
"""(a cell, what it means)."""


@dataclass(frozen=True)
class FaultRow:
    """One fault with all its flights: what the list declares, and what was measured, of several flights the worst."""

    fault: Fault
    text: str  # of the header: "coil: open circuit, no current"
    results: tuple[Result, ...]

    @property
    def part(self) -> str:
        """The part of the satellite that it belongs to."""
        part = self.text.partition(": ")[0]
        return "coils" if part == "coil" else part

    @property
    def breaks(self) -> str:
        """What breaks of that part."""
        return self.text.partition(": ")[2]

    def cell(self, moment: str) -> Cell | None:
        """The outcome at this moment; None where it was not flown."""
        for result in self.results:
            if result.case.moment.name == moment:
                return Cell(result.outcome, _short(result), result.passed)
        return None

    @property
    def within(self) -> str:
        """After how many cycles at most it shows: the number, and what it is made of."""
        within = self.fault.within
        limits = [within.cycles(result.case.setting) for result in self.results]
        if None in limits or within.text == str(max(limits)):
            return within.text
        return f"{max(limits)}: {within.text}"

    @property
    def may_end(self) -> list[str]:
        """The outcomes declared: where the fault passes, and where it stays."""
        passing, lasting = (_words(outcomes) for outcomes in (self.fault.passing, self.fault.lasting))
        return [f"{where}: {ends}" for where, ends in (("passing", passing), ("for good", lasting)) if ends]

    @property
    def shown_after(self) -> str:
        """Cycles from the onset to the first that told of it, that one included."""
        if not self.fault.bits:
            return "–"
        told = [result.shown_after for result in self.results if result.shown_after is not None]
        if not told:
            return "not told"
        silent = len(self.results) - len(told)
        return f"{max(told)}; not told in {silent} of {len(self.results)} flights" if silent else str(max(told))

    @property
    def worst_dipole(self) -> str:
        """Largest commanded mean dipole in a cycle that told of it, mA m²."""
        return f"{max(result.worst_a_m2 for result in self.results) * 1e3:.3g}" if self.told else "–"

    @property
    def outcomes(self) -> list[str]:
        """What came of it, each outcome once, the latest of each."""
        by_time = sorted(self.results, key=lambda result: result.later_s or 0.0)
        latest = {result.outcome: result.outcome_text for result in by_time}
        return [latest[outcome] for outcome in Outcome if outcome in latest]

    @property
    def final_deg_s(self) -> float:
        """Fastest true ‖ω‖ at the end of a flight."""
        return max(result.final_deg_s for result in self.results)

    @property
    def told(self) -> bool:
        """Whether any flight told of it."""
        return any(result.shown_after is not None for result in self.results)

    @property
    def may_go_unseen(self) -> bool:
        """Whether it did, or is declared so."""
        return Outcome.UNSEEN in {*self.fault.passing, *self.fault.lasting, *(result.outcome for result in self.results)}


def _short(result: Result) -> str:
    at_once = result.outcome is Outcome.SAFE and result.later_s < 0.5
    return "safe at once" if at_once else ENDINGS[result.outcome].cell.format(result.later_s)


def _words(outcomes: Collection[Outcome]) -> str:
    return ", ".join(ending.word for outcome, ending in ENDINGS.items() if outcome in outcomes)


@dataclass(frozen=True)
class FaultsFlown:
    """The matrix and the flipped bits of one mission. The texts of the faults are the header's."""

    matrix: Matrix
    tallies: tuple[Tally, ...]
    header: Header

    passes_after_s = PASSES_AFTER_S
    legend = LEGEND

    @property
    def settled_s(self) -> float:
        """When the flight without a fault settles."""
        return self.matrix.nominal.first(mrd.MRD_MODE_SETTLED) * self.matrix.scaling.period_s

    @property
    def moments(self) -> dict[str, float]:
        """The columns of the matrix, and where each is, in s from the first sample."""
        period_s = self.matrix.scaling.period_s
        return {r.case.moment.name: r.case.moment.cycle * period_s for r in self.matrix.results}

    @cached_property
    def rows(self) -> list[FaultRow]:
        """The faults that were flown, in the order of the list."""
        results = {fault.name: tuple(r for r in self.matrix.results if r.case.fault.name == fault.name) for fault in FAULTS}
        return [FaultRow(fault, self._text(fault), results[fault.name]) for fault in FAULTS if results[fault.name]]

    @property
    def groups(self) -> list[tuple[str, list[FaultRow]]]:
        """(part of the satellite, its faults)."""
        return [(part, list(rows)) for part, rows in groupby(self.rows, key=lambda row: row.part)]

    @property
    def not_flown(self) -> list[str]:
        """Faults of what the mission does not have."""
        flown = {row.fault.name for row in self.rows}
        return [self._text(fault) for fault in FAULTS if fault.name not in flown]

    @property
    def problems(self) -> list[str]:
        """What is not as declared, in words."""
        return [
            f"{self._text(r.case.fault)}, {r.case.moment.name}: {problem}" for r in self.matrix.failed for problem in r.problems
        ]

    @property
    def may_go_unseen(self) -> list[FaultRow]:
        """Faults that did, or are declared so; those that no flight told of first."""
        return sorted((row for row in self.rows if row.may_go_unseen), key=lambda row: row.told)

    def _text(self, fault: Fault) -> str:
        return self.header.texts[f"MRD_F_{fault.name}"]

    @property
    def flips(self) -> list[tuple[str, list[Tally]]]:
        """(moment, a tally for each part)."""
        return [(moment, list(tallies)) for moment, tallies in groupby(self.tallies, key=lambda tally: tally.moment)]

    def tallies_of(self, *parts: str) -> list[Tally]:
        """The tallies of these parts at all moments."""
        return [tally for tally in self.tallies if tally.part in parts]

    @property
    def flip_totals(self) -> str:
        """What came of all flips, in one sentence."""
        memory, inputs = self.tallies_of("state", "config"), self.tallies_of("inputs")
        tried = [sum(tally.tried for tally in tallies) for tallies in (memory, inputs)]
        longest = max((tally.longest for tally in inputs), default=0)
        return (
            f"{sum(tried)} flips at {len(self.flips)} moments: of {tried[0]} in state and configuration {sum(t.caught for t in memory)} were caught "
            f"in the same cycle with all coils off; of {tried[1]} in the inputs {sum(t.unchanged for t in inputs)} had no effect, "
            f"{sum(t.forgotten for t in inputs)} were forgotten after at most {longest} cycles and {sum(t.lasting for t in inputs)} differed to the end; "
            f"{sum(t.wild for t in self.tallies)} led to a pulse beyond a limit or from a mode that makes none."
        )
