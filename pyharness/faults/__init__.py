"""Named faults, each flown and shown: the list, the moments, the judgement, every single flipped bit."""

from __future__ import annotations

from pyharness.faults.catalogue import FAULTS, Fault, Outcome
from pyharness.faults.judge import Result
from pyharness.faults.matrix import Matrix, fly_matrix, nominal_flight
from pyharness.faults.moments import Case, cases
from pyharness.faults.watch import Watched, watch

__all__ = ["FAULTS", "Case", "Fault", "Matrix", "Outcome", "Result", "Watched", "cases", "fly_matrix", "nominal_flight", "watch"]
