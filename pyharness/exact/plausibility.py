"""Stage 2: is the norm of the field one that the field can have?"""

from __future__ import annotations

from pyharness.exact.constants import MRD_S_FIELD_IMPLAUSIBLE, MRD_S_MAG_RANGE, MRD_S_SAMPLE_MISSING
from pyharness.exact.num import Record, Vector, bit, isqrt, square
from pyharness.exact.ranges import check

NO_NORM = 1 << MRD_S_SAMPLE_MISSING | 1 << MRD_S_MAG_RANGE


def assess(config: Record, field: Vector, status: int) -> tuple[Record, int]:
    """The norm, and its square against the plausible range. Returns the trace's part and the status bits.

    Without a field in range there is no norm, hence nothing that could be implausible.
    """
    if status & NO_NORM:
        return {"norm_sq": 0, "norm": 0}, 0
    x, y, z = field
    norm_sq = check("plausibility.norm_sq", square(x) + square(y) + square(z))
    norm = check("plausibility.norm", isqrt(norm_sq))
    implausible = not config["norm_min_sq"] <= norm_sq <= config["norm_max_sq"]
    return {"norm_sq": norm_sq, "norm": norm}, bit(implausible, MRD_S_FIELD_IMPLAUSIBLE)
