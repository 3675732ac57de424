"""Stage 10: the demand brought within the dipole limit, axis by axis or with its direction kept."""

from __future__ import annotations

from pyharness.exact.constants import (
    MRD_S_SATURATED_X,
    MRD_S_SATURATED_Y,
    MRD_S_SATURATED_Z,
    MRD_SATURATE_PER_AXIS,
)
from pyharness.exact.num import (
    INT16_MAX,
    Record,
    Vector,
    bit,
    clamp,
    exceeds,
    largest,
    norm_shift,
    round_div,
    vmin,
    with_sign,
)
from pyharness.exact.ranges import check, check3


def keep_direction(demand: Vector, greatest: int) -> Vector:
    """All axes scaled by the limit over the greatest, which is above it and becomes exactly the limit."""
    divisor, exponent = norm_shift(greatest, 16)
    divisor = check("saturation.divisor", divisor)
    exponent = check("saturation.exponent", exponent)
    reciprocal = check("saturation.reciprocal", round_div(INT16_MAX << 16, divisor))

    def scale(x: int) -> int:
        # No change to numbers; it tells a type that does not know which axis is the greatest that none is
        # greater.
        product = check("saturation.product", vmin(abs(x) >> exponent, divisor) * reciprocal)
        return with_sign(vmin(INT16_MAX, (product + 2**15) >> 16), x)

    x, y, z = demand
    return scale(x), scale(y), scale(z)


def saturate(config: Record, demand: Vector) -> tuple[Record, int]:
    """The command: trace's part and status bits. Saturates and says so; no axis changes its sign."""
    x, y, z = demand
    if not exceeds(demand, INT16_MAX):
        return {"command": check3("saturation.command", clamp3(demand))}, 0
    status = (
        bit(abs(x) > INT16_MAX, MRD_S_SATURATED_X)
        | bit(abs(y) > INT16_MAX, MRD_S_SATURATED_Y)
        | bit(abs(z) > INT16_MAX, MRD_S_SATURATED_Z)
    )
    if config["saturation"] == MRD_SATURATE_PER_AXIS:
        command = clamp3(demand)
    else:
        command = keep_direction(demand, check("saturation.largest", largest(demand)))
    return {"command": check3("saturation.command", command)}, status


def clamp3(demand: Vector) -> Vector:
    """Each axis limited by itself."""
    x, y, z = demand
    return clamp(x, INT16_MAX), clamp(y, INT16_MAX), clamp(z, INT16_MAX)
