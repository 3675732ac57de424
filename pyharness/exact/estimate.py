"""Stage 12: the rate across the field from its turn, and the rate estimate, from that or from the gyro."""

from __future__ import annotations

from pyharness.exact.constants import MRD_S_ESTIMATE_FELL_BACK, MRD_SETTLE_BY_GYRO
from pyharness.exact.num import UINT16_MAX, Record, Vector, floor_div, isqrt, square, vmax, vmin
from pyharness.exact.ranges import check


def length(v: Vector) -> int:
    """The norm of a vector of 16-bit counts, rounded down."""
    x, y, z = v
    return isqrt(check("estimate.sum_sq", square(x) + square(y) + square(z)))


def rate_across_field(supervisor: Record, filtered: Vector, norm: int) -> int:
    """Rate count across the field: the chord of its turn in one period, over its norm. Saturates at 65535."""
    turn = check("estimate.turn", length(filtered))
    field = check("estimate.norm", vmax(1, norm))
    chord = UINT16_MAX
    if turn < 2 * field:
        chord = floor_div(turn << 15, field)
    chord = check("estimate.chord", chord)
    product = check("estimate.product", chord * supervisor["estimate_mantissa"])
    return check("estimate.across", vmin(UINT16_MAX, product >> supervisor["estimate_shift"]))


def estimate(supervisor: Record, trace: Record) -> tuple[Record, int, int, int]:
    """The trace's part, rate, rate_valid and the status bits of this stage."""
    across, across_valid = 0, trace["derivative"]["valid"]
    if across_valid:
        across = rate_across_field(supervisor, trace["low_pass"]["filtered"], trace["plausibility"]["norm"])
    part = {"across": across, "across_valid": across_valid}
    if supervisor["settle_by"] != MRD_SETTLE_BY_GYRO:
        return part, across, across_valid, 0
    if trace["calibration"]["rate_valid"]:
        return part, check("outputs.rate", length(trace["calibration"]["rate"])), 1, 0
    return part, across, across_valid, 1 << MRD_S_ESTIMATE_FELL_BACK
