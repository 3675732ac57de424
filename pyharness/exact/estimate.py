"""Stage 9: the rate estimate, from the gyro or from the turn of the field."""

from __future__ import annotations

from pyharness.exact.constants import MRD_S_ESTIMATE_FELL_BACK, MRD_SETTLE_BY_GYRO
from pyharness.exact.num import UINT16_MAX, Record, Vector, floor_div, isqrt, square, vmax, vmin
from pyharness.exact.ranges import check


def norm(v: Vector) -> int:
    """The norm of a vector of 16-bit counts, rounded down."""
    x, y, z = v
    return isqrt(check("estimate.sum_sq", square(x) + square(y) + square(z)))


def rate_across_field(supervisor: Record, filtered: Vector, norm_sq: int) -> int:
    """Rate count across the field: the chord of its turn in one period, over its norm. Saturates at 65535."""
    turn = check("estimate.turn", norm(filtered))
    field = check("estimate.norm", vmax(1, isqrt(norm_sq)))
    chord = UINT16_MAX
    if turn < 2 * field:
        chord = floor_div(turn << 15, field)
    chord = check("estimate.chord", chord)
    product = check("estimate.product", chord * supervisor["estimate_mantissa"])
    return vmin(UINT16_MAX, product >> supervisor["estimate_shift"])


def estimate(supervisor: Record, trace: Record) -> tuple[int, int, int]:
    """Rate, rate_valid and the status bits of this stage."""
    status = 0
    if supervisor["settle_by"] == MRD_SETTLE_BY_GYRO:
        if trace["calibration"]["rate_valid"]:
            return check("outputs.rate", norm(trace["calibration"]["rate"])), 1, 0
        status = 1 << MRD_S_ESTIMATE_FELL_BACK
    if not trace["derivative"]["valid"]:
        return 0, 0, status
    rate = rate_across_field(supervisor, trace["low_pass"]["filtered"], trace["plausibility"]["norm_sq"])
    return check("outputs.rate", rate), 1, status
