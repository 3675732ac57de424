"""Stage 6: the derivative of the field, from two trusted samples over their measured interval."""

from __future__ import annotations

from pyharness.exact.constants import (
    MRD_S_DERIVATIVE_CLAMPED,
    MRD_S_INTERVAL_LONG,
    MRD_S_INTERVAL_SHORT,
    MRD_S_NO_PREVIOUS,
)
from pyharness.exact.num import (
    INT16_MAX,
    WRAP,
    Record,
    Vector,
    bit,
    clamp,
    exceeds,
    norm_shift,
    round_div,
    round_shift,
    vmin,
)
from pyharness.exact.ranges import check, check3


def factor_of(period_us: int, interval_us: int) -> int:
    """period / interval in Q14, at most 2; the interval is one to three halves of the period."""
    period, k = norm_shift(period_us, 15)
    period = check("derivative.period", period)
    interval = check("derivative.interval", interval_us >> k)
    quotient = check("derivative.quotient", round_div(period << 14, interval))
    return check("derivative.factor", vmin(quotient, 2**15))


def differentiate(
    state: Record, config: Record, field: Vector, sample_us: int, trusted: int,
) -> tuple[Record, int]:
    """The change of the field a period.

    Returns the trace's part and the status bits. Saturates and says so.
    """
    nothing = {"interval_us": 0, "factor": 0, "derivative": (0, 0, 0), "valid": 0}
    if not trusted:
        return nothing, 0
    if not state["field_valid"]:
        return nothing, 1 << MRD_S_NO_PREVIOUS
    interval_us = check("derivative.interval_us", (sample_us - state["sample_us"]) % WRAP)
    period_us = config["period_us"]
    if interval_us < (period_us + 1) // 2:
        return {**nothing, "interval_us": interval_us}, 1 << MRD_S_INTERVAL_SHORT
    if interval_us > period_us + period_us // 2:
        return {**nothing, "interval_us": interval_us}, 1 << MRD_S_INTERVAL_LONG
    factor = factor_of(period_us, interval_us)
    x, y, z = field
    px, py, pz = state["field"]
    dx, dy, dz = check3("derivative.difference", (x - px, y - py, z - pz))
    qx, qy, qz = check3("derivative.product", (dx * factor, dy * factor, dz * factor))
    unclamped = (round_shift(qx, 14), round_shift(qy, 14), round_shift(qz, 14))
    check3("derivative.unclamped", unclamped)
    ux, uy, uz = unclamped
    derivative = (clamp(ux, INT16_MAX), clamp(uy, INT16_MAX), clamp(uz, INT16_MAX))
    return {
        "interval_us": interval_us,
        "factor": factor,
        "derivative": check3("derivative.derivative", derivative),
        "valid": 1,
    }, bit(exceeds(unclamped, INT16_MAX), MRD_S_DERIVATIVE_CLAMPED)
