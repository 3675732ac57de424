"""Stage 9: the derivative-of-field law m = -k dB/dt, or the rate-damping law m = k (w x B)."""

from __future__ import annotations

from pyharness.exact.constants import (
    MRD_GAIN_CONSTANT,
    MRD_LAW_DERIVATIVE,
    MRD_LAW_NONE,
    MRD_LAW_RATE,
    MRD_S_FELL_BACK,
)
from pyharness.exact.num import Record, Vector, floor_div, limit, norm_shift, round_shift, vmin
from pyharness.exact.ranges import check, check3

Gain = tuple[Vector, Vector]  # mantissa and shift of each axis: gain = mantissa / 2^shift


def choose(config: Record, trace: Record) -> tuple[int, int]:
    """The law that acts in this cycle, and the status bits."""
    if not trace["gate"]["trusted"]:
        return MRD_LAW_NONE, 0
    status = 0
    if config["law"] == MRD_LAW_RATE:
        if trace["calibration"]["rate_valid"]:
            return MRD_LAW_RATE, 0
        status = 1 << MRD_S_FELL_BACK
    return (MRD_LAW_DERIVATIVE if trace["derivative"]["valid"] else MRD_LAW_NONE), status


def normalise(mantissa: int, shift: int, reciprocal: int, exponent: int) -> tuple[int, int]:
    """One axis's gain times the reciprocal of the norm, as mantissa and shift again."""
    scaled = check("law.scaled", mantissa * reciprocal)
    if scaled >= 2**31:
        return scaled >> 16, shift + exponent + 15
    return scaled >> 15, shift + exponent + 16


def gain_used(config: Record, gain: Record, norm_sq: int) -> Gain:
    """The gain of each axis, divided by the squared norm if the configuration says so.

    Relative error of the division: above -2^-14, since the reciprocal and the mantissa are each rounded
    down by less than 2^-15, and below 2^-15, since the norm is cut to 16 bits.
    """
    mantissa, shift = gain["mantissa"], gain["shift"]
    if config["gain_scaling"] != MRD_GAIN_CONSTANT:
        norm = check("law.norm", limit(norm_sq, config["norm_min_sq"], config["norm_max_sq"]))
        divisor, exponent = norm_shift(norm, 16)
        exponent = check("law.exponent", exponent)
        reciprocal = check("law.reciprocal", vmin(65535, floor_div(2**31, divisor)))
        mx, hx = normalise(mantissa[0], shift[0], reciprocal, exponent)
        my, hy = normalise(mantissa[1], shift[1], reciprocal, exponent)
        mz, hz = normalise(mantissa[2], shift[2], reciprocal, exponent)
        mantissa, shift = (mx, my, mz), (hx, hy, hz)
    return check3("law.mantissa", mantissa), check3("law.shift", shift)


def derivative_law(filtered: Vector, gain: Gain) -> Vector:
    """Demand against the filtered derivative. Odd in it; of the opposite sign on each axis, or 0."""
    (mx, my, mz), (hx, hy, hz) = gain
    x, y, z = filtered
    px, py, pz = check3("law.product", (-x * mx, -y * my, -z * mz))
    return round_shift(px, hx), round_shift(py, hy), round_shift(pz, hz)


def cross_product(w: Vector, b: Vector) -> Vector:
    """w x B."""
    wx, wy, wz = w
    bx, by, bz = b
    return check3("law.cross", (wy * bz - wz * by, wz * bx - wx * bz, wx * by - wy * bx))


def rate_law(cross: Vector, gain: Gain) -> Vector:
    """Demand along w x B. Odd in w and in B; of the sign of w x B on each axis, or 0."""
    (mx, my, mz), (hx, hy, hz) = gain
    x, y, z = cross
    px, py, pz = check3("law.cross_product", (x * mx, y * my, z * mz))
    return round_shift(px, 16 + hx), round_shift(py, 16 + hy), round_shift(pz, 16 + hz)


def command_demand(config: Record, trace: Record) -> tuple[Record, int]:
    """The demand of the law that acts.

    Returns the trace's part and the status bits. Cannot overflow: every shift is ≥ 1.
    """
    active, status = choose(config, trace)
    nothing = (0, 0, 0)
    if active == MRD_LAW_NONE:
        parts = ("cross", "mantissa", "shift", "demand")
        return {"active": active, **dict.fromkeys(parts, nothing)}, status
    norm_sq = trace["plausibility"]["norm_sq"]
    if active == MRD_LAW_RATE:
        gain = gain_used(config, config["rate_gain"], norm_sq)
        cross = cross_product(trace["calibration"]["rate"], trace["calibration"]["field"])
        demand = rate_law(cross, gain)
    else:
        gain = gain_used(config, config["derivative_gain"], norm_sq)
        cross = nothing
        demand = derivative_law(trace["low_pass"]["filtered"], gain)
    mantissa, shift = gain
    return {
        "active": active,
        "cross": cross,
        "mantissa": mantissa,
        "shift": shift,
        "demand": check3("law.demand", demand),
    }, status
