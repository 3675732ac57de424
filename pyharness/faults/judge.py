"""What came of a flight with a fault: when it showed, what the coils did then, how the flight ended; held against the list."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pyharness.exact import constants as mrd
from pyharness.faults.catalogue import Outcome
from pyharness.faults.moments import Case
from pyharness.faults.watch import Watched

AS_WITHOUT_S = 60.0
"""Settled within this of the flight without a fault is as without."""
QUIET_END = 0.1
"""Last part of a flight in which no coil was driven: held."""


@dataclass(frozen=True)
class Result:
    """One fault at one moment."""

    case: Case
    shown_after: int | None  # cycles from the onset to the first that tells, that one included; None: none told
    worst_a_m2: float  # largest commanded mean dipole in the cycles that told of it
    outcome: Outcome
    later_s: float | None  # settled later than without the fault; or, of SAFE, so long after the onset
    final_deg_s: float  # true rate at the end
    problems: tuple[str, ...]  # what is not as the list has it

    @property
    def passed(self) -> bool:
        """Whether all is as the list has it."""
        return not self.problems

    @property
    def outcome_text(self) -> str:
        """The outcome, with its time."""
        if self.outcome is Outcome.LATER:
            return f"settled {self.later_s:.0f} s later"
        if self.outcome is Outcome.SAFE:
            return f"safe within {self.later_s:.0f} s" if self.later_s else "safe at once"
        return self.outcome.value


def judge(case: Case, flown: Watched, nominal: Watched) -> Result:
    """Judge a flight beside the one without a fault."""
    onset, mask = case.setting.first, case.fault.mask
    told = flown.first_told(mask, onset)
    tells = np.flatnonzero(flown.status[onset:] & np.uint32(mask)) + onset
    worst = float(flown.dipole_a_m2[tells].max(initial=0.0))
    outcome, later_s = _outcome(case, flown, nominal, told)
    shown_after = None if told is None else told - onset + 1
    result = Result(case, shown_after, worst, outcome, later_s, float(flown.rate_deg_s[-1]), ())
    return Result(**{**result.__dict__, "problems": tuple(_problems(result))})


def _outcome(case: Case, flown: Watched, nominal: Watched, told: int | None) -> tuple[Outcome, float | None]:
    period_s = flown.flight.scaling.period_s
    last = int(flown.mode[-1])
    if last == mrd.MRD_MODE_SETTLED:
        return _settled(flown, nominal, period_s)
    if last == mrd.MRD_MODE_SAFE:
        return Outcome.SAFE, (flown.first(last, case.setting.first) - case.setting.first) * period_s
    if flown.rate_deg_s[-1] <= flown.flight.scaling.mission.control.wake_deg_s:
        return Outcome.DAMPED, None
    if not flown.ticks[-round(QUIET_END * len(flown.ticks)) :].any():
        return Outcome.HELD, None
    return (Outcome.UNSEEN if told is None else Outcome.TOLD), None


def _settled(flown: Watched, nominal: Watched, period_s: float) -> tuple[Outcome, float]:
    """Settled for good in the last cycle that came from another mode."""
    left = np.flatnonzero(flown.mode != mrd.MRD_MODE_SETTLED)
    since = int(left[-1]) + 1 if left.size else 0
    later_s = (since - nominal.first(mrd.MRD_MODE_SETTLED)) * period_s
    return (Outcome.AS_WITHOUT if later_s <= AS_WITHOUT_S else Outcome.LATER), later_s


def _problems(result: Result) -> list[str]:
    case = result.case
    fault = case.fault
    allowed = fault.lasting if case.moment.stays else fault.passing
    problems = []
    if result.outcome not in allowed:
        problems.append(f"ended as {result.outcome_text!r}, declared: {' or '.join(sorted(o.value for o in allowed))}")
    limit = fault.within.cycles(case.setting)
    if limit is not None:
        if result.shown_after is None:
            problems.append(f"did not show, declared: within {limit} cycles")
        elif result.shown_after > limit:
            problems.append(f"showed after {result.shown_after} cycles, declared: within {limit}")
    if fault.holds and result.worst_a_m2 > 0.0:
        problems.append(f"a coil was driven by {result.worst_a_m2:.3g} A m² in a cycle that told of the fault")
    return problems
