"""Stage 12: the rate across the field from its turn, and the rate estimate, from that or from the gyro."""

from __future__ import annotations

from pyharness.exact.constants import MRD_S_ESTIMATE_FELL_BACK, MRD_SETTLE_BY_GYRO
from pyharness.exact.num import UINT16_MAX, Record, Vector, floor_div, isqrt, square, vmax, vmin
from pyharness.exact.ranges import check


def length(v: Vector) -> int:
    """The norm of a vector of 16-bit counts, rounded down."""
    x, y, z = v
    return isqrt(check("estimate.sum_sq", square(x) + square(y) + square(z)))


def turn_of_field(filtered: Vector, norm: int) -> int:
    """The chord of the field's turn in one period, Q15 rad. Saturates at 65535."""
    change = check("estimate.change", length(filtered))
    field = check("estimate.norm", vmax(1, norm))
    turn = UINT16_MAX
    if change < 2 * field:
        turn = floor_div(change << 15, field)
    return check("estimate.turn", turn)


def rate_across_field(supervisor: Record, turn: int) -> int:
    """Rate count across the field, from its turn. Saturates at 65535."""
    product = check("estimate.product", turn * supervisor["estimate_mantissa"])
    return check("estimate.across", vmin(UINT16_MAX, product >> supervisor["estimate_shift"]))


def estimate(supervisor: Record, trace: Record) -> tuple[Record, int, int, int]:
    """The trace's part, rate, rate_valid and the status bits of this stage."""
    turn, across, across_valid = 0, 0, trace["derivative"]["valid"]
    if across_valid:
        turn = turn_of_field(trace["low_pass"]["filtered"], trace["plausibility"]["norm"])
        across = rate_across_field(supervisor, turn)
    part = {"turn": turn, "across": across, "across_valid": across_valid}
    if supervisor["settle_by"] != MRD_SETTLE_BY_GYRO:
        return part, across, across_valid, 0
    if trace["calibration"]["rate_valid"]:
        return part, check("outputs.rate", length(trace["calibration"]["rate"])), 1, 0
    return part, across, across_valid, 1 << MRD_S_ESTIMATE_FELL_BACK
