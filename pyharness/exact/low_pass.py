"""Stage 7: first-order low-pass of the derivative, with eight fraction bits so that it does not stick."""

from __future__ import annotations

from pyharness.exact.num import Record, Vector, round_shift
from pyharness.exact.ranges import check3


def follow(old: Vector, target: Vector, gain: int) -> Vector:
    """The filter, drawn towards its target by gain / 2^15.

    Cannot overflow: the result lies between the two.
    """
    ox, oy, oz = old
    tx, ty, tz = target
    ex, ey, ez = check3("low_pass.error", (tx - ox, ty - oy, tz - oz))
    px, py, pz = check3("low_pass.product", (ex * gain, ey * gain, ez * gain))
    return ox + round_shift(px, 15), oy + round_shift(py, 15), oz + round_shift(pz, 15)


def smooth(state: Record, config: Record, derivative: Record) -> Record:
    """The trace's part: new filter and filtered derivative, 0 without a derivative."""
    if not derivative["valid"]:
        return {"filter": (0, 0, 0), "filtered": (0, 0, 0)}
    x, y, z = derivative["derivative"]
    new = check3("low_pass.target", (256 * x, 256 * y, 256 * z))
    if state["filter_valid"]:
        new = follow(state["filter"], new, config["filter_gain"])
    fx, fy, fz = check3("low_pass.filter", new)
    filtered = (round_shift(fx, 8), round_shift(fy, 8), round_shift(fz, 8))
    return {"filter": new, "filtered": check3("low_pass.filtered", filtered)}
