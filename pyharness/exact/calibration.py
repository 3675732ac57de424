"""Stage 1: raw counts to calibrated counts."""

from __future__ import annotations

from pyharness.exact.constants import (
    MRD_S_GYRO_MISSING,
    MRD_S_GYRO_RANGE,
    MRD_S_MAG_RANGE,
    MRD_S_SAMPLE_MISSING,
)
from pyharness.exact.num import INT16_MAX, Record, Vector, bit, clamp, exceeds, flag, round_shift
from pyharness.exact.ranges import check3

ZERO = (0, 0, 0)


def calibrate_sensor(sensor: Record, raw: Vector) -> tuple[Vector, bool]:
    """Matrix and offset on the raw counts of one sensor.

    Returns the clamped counts and whether out of range.
    """
    greatest = sensor["limit"] - 1
    if exceeds(raw, greatest):
        return ZERO, True
    # No change to numbers; it tells every element's bound to a type that cannot draw it from the test above.
    rx, ry, rz = clamp(raw[0], greatest), clamp(raw[1], greatest), clamp(raw[2], greatest)
    xx, xy, xz, yx, yy, yz, zx, zy, zz = sensor["matrix"]
    ox, oy, oz = sensor["offset"]
    shift = sensor["shift"]
    sx, sy, sz = check3("calibration.sum", (
        xx * rx + xy * ry + xz * rz,
        yx * rx + yy * ry + yz * rz,
        zx * rx + zy * ry + zz * rz,
    ))
    values = check3("calibration.value", (
        round_shift(sx, shift) - ox,
        round_shift(sy, shift) - oy,
        round_shift(sz, shift) - oz,
    ))
    x, y, z = values
    return (clamp(x, INT16_MAX), clamp(y, INT16_MAX), clamp(z, INT16_MAX)), exceeds(values, INT16_MAX)


def calibrate(config: Record, inputs: Record) -> tuple[Record, int]:
    """Both sensors of a path. Returns the trace's part and the status bits. Saturates and says so."""
    field = rate = ZERO
    rate_valid = 0
    if inputs["mag_valid"]:
        field, out_of_range = calibrate_sensor(config["mag"], inputs["mag_raw"])
        status = bit(out_of_range, MRD_S_MAG_RANGE)
    else:
        status = 1 << MRD_S_SAMPLE_MISSING
    if config["gyro_fitted"]:
        if inputs["gyro_valid"]:
            rate, out_of_range = calibrate_sensor(config["gyro"], inputs["gyro_raw"])
            rate_valid = flag(not out_of_range)
            status |= bit(out_of_range, MRD_S_GYRO_RANGE)
        else:
            status |= 1 << MRD_S_GYRO_MISSING
    return {
        "field": check3("calibration.field", field),
        "rate": check3("calibration.rate", rate),
        "rate_valid": rate_valid,
    }, status
