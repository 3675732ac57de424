"""Stage 8: do gyro and field tell of the same turn? In the body a field at rest changes by -w x B."""

from __future__ import annotations

from pyharness.exact.ballot import vote
from pyharness.exact.constants import MRD_S_DERIVATIVE_CLAMPED, MRD_S_GYRO_DISAGREES
from pyharness.exact.law import cross_product
from pyharness.exact.num import Record, Vector, bit, exceeds, largest, round_shift
from pyharness.exact.ranges import check, check3


def midpoint(a: Vector, b: Vector) -> Vector:
    """The mean of two vectors of counts, halves away from zero."""
    (ax, ay, az), (bx, by, bz) = a, b
    return round_shift(ax + bx, 1), round_shift(ay + by, 1), round_shift(az + bz, 1)


def residual_of(config: Record, derivative: Vector, mean_rate: Vector, mean_field: Vector) -> Vector:
    """Derivative plus w x B in field counts a period: what the turn does not explain."""
    mantissa, shift = config["agree_mantissa"], 16 + config["agree_shift"]
    cx, cy, cz = cross_product(mean_rate, mean_field)
    px, py, pz = check3("agreement.product", (cx * mantissa, cy * mantissa, cz * mantissa))
    x, y, z = derivative
    return check3("agreement.residual", (
        x + round_shift(px, shift),
        y + round_shift(py, shift),
        z + round_shift(pz, shift),
    ))


def comparable(state: Record, config: Record, rate_valid: int, derivative: Record, status: int) -> bool:
    """Whether there are two rates and a derivative to compare, however fast the turn."""
    return bool(
        config["agree_limit"] and rate_valid and state["rate_known"] and derivative["valid"]
        and not status >> MRD_S_DERIVATIVE_CLAMPED & 1)


def agree(
    state: Record, config: Record, calibration: Record, derivative: Record, status: int,
) -> tuple[Record, Record, int]:
    """The comparison, from the state as it was before this cycle's derivative.

    Returns the trace's part, what the state keeps, and the status bits.
    """
    if not config["gyro_fitted"]:
        return {"judged": 0, "residual": (0, 0, 0)}, {}, 0
    rate, rate_valid = calibration["rate"], calibration["rate_valid"]
    judged, residual, ballot = 0, (0, 0, 0), state["agreement"]
    if comparable(state, config, rate_valid, derivative, status):
        mean_rate = check3("agreement.mean_rate", midpoint(rate, state["rate"]))
        if not exceeds(mean_rate, config["agree_rate_max"]):
            mean_field = check3("agreement.mean_field", midpoint(calibration["field"], state["field"]))
            judged = 1
            residual = residual_of(config, derivative["derivative"], mean_rate, mean_field)
            allowed = check(
                "agreement.allowed", config["agree_limit"] + (largest(derivative["derivative"]) >> 3))
            ballot = vote(ballot, exceeds(residual, allowed))
    kept = {"rate": rate, "rate_known": rate_valid, "agreement": ballot}
    return {"judged": judged, "residual": residual}, kept, bit(ballot["tripped"], MRD_S_GYRO_DISAGREES)
