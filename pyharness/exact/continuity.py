"""Stage 5: does each sample follow from the one before, and is it to be used, all checks considered?"""

from __future__ import annotations

from pyharness.exact.ballot import vote
from pyharness.exact.constants import (
    MRD_S_BLANKED,
    MRD_S_FIELD_IMPLAUSIBLE,
    MRD_S_GYRO_FROZEN,
    MRD_S_MAG_DEAD_AXIS,
    MRD_S_MAG_FROZEN,
    MRD_S_MAG_JUMP,
    MRD_S_MAG_NOISY,
    MRD_S_MAG_RANGE,
    MRD_S_SAMPLE_MISSING,
    MRD_S_SAMPLE_OFF_TIME,
)
from pyharness.exact.num import INT16_MAX, UINT16_MAX, WRAP, Record, Vector, bit, clamp, count, flag, square
from pyharness.exact.plausibility import NO_NORM
from pyharness.exact.ranges import check, check3

_MISSING = 1 << MRD_S_SAMPLE_MISSING
_UNSTEADY = 1 << MRD_S_BLANKED | 1 << MRD_S_SAMPLE_OFF_TIME  # a sample whose norm may be that of a coil
_REJECTED = _MISSING | 1 << MRD_S_MAG_RANGE | 1 << MRD_S_SAMPLE_OFF_TIME | 1 << MRD_S_BLANKED
_WAIVABLE = (
    1 << MRD_S_FIELD_IMPLAUSIBLE
    | 1 << MRD_S_MAG_FROZEN
    | 1 << MRD_S_MAG_DEAD_AXIS
    | 1 << MRD_S_MAG_NOISY
)
_JUMP = 1 << MRD_S_MAG_JUMP


def counts(state: Record, config: Record, inputs: Record, status: int) -> tuple[Vector, Record, int]:
    """How long each magnetometer count has stood still.

    Returns the counters, what the state keeps, and the status bits.
    """
    if status & _MISSING:
        return (0, 0, 0), {}, 0
    known, raw, last = state["mag_known"], inputs["mag_raw"], state["mag_raw"]
    same_x, same_y, same_z = state["mag_same"]
    same = (
        count(same_x, UINT16_MAX) if known and raw[0] == last[0] else 0,
        count(same_y, UINT16_MAX) if known and raw[1] == last[1] else 0,
        count(same_z, UINT16_MAX) if known and raw[2] == last[2] else 0,
    )
    frozen = config["frozen_limit"] != 0 and min(same) >= config["frozen_limit"]
    dead = not frozen and config["dead_limit"] != 0 and max(same) >= config["dead_limit"]
    kept = {"mag_raw": raw, "mag_known": 1, "mag_same": same}
    return same, kept, bit(frozen, MRD_S_MAG_FROZEN) | bit(dead, MRD_S_MAG_DEAD_AXIS)


def jump(state: Record, config: Record, field: Vector, sample_us: int, status: int) -> tuple[int, Record, int]:
    """Squared change from the last trusted sample, where that is recent.

    Returns it, what the state keeps, and the status bits.
    """
    if status & NO_NORM or not state["field_valid"]:
        return 0, {}, 0
    elapsed = check("continuity.elapsed", (sample_us - state["sample_us"]) % WRAP)
    if elapsed > config["period_us"] + config["period_us"] // 2:
        return 0, {}, 0
    x, y, z = field
    px, py, pz = state["field"]
    dx, dy, dz = check3("continuity.difference", (x - px, y - py, z - pz))
    jump_sq = check(
        "continuity.jump_sq",
        square(clamp(dx, INT16_MAX)) + square(clamp(dy, INT16_MAX)) + square(clamp(dz, INT16_MAX)))
    jumped = jump_sq > config["jump_max_sq"]
    return jump_sq, {"jumping": vote(state["jumping"], jumped)}, bit(jumped, MRD_S_MAG_JUMP)


def noise(state: Record, config: Record, norm: int, status: int) -> tuple[int, Record, int]:
    """Change of the norm, which does not turn with the body.

    Returns the change, what the state keeps, and the status bits.
    """
    change, kept = 0, {"norm_known": 0}
    ballot = state["noise"]
    if not status & (NO_NORM | _UNSTEADY):
        kept = {"norm": norm, "norm_known": 1}
        if state["norm_known"]:
            change = check("continuity.norm_change", abs(norm - state["norm"]))
            ballot = vote(ballot, change > config["noise_limit"])
    return change, {**kept, "noise": ballot}, bit(ballot["tripped"], MRD_S_MAG_NOISY)


def gyro_counts(state: Record, config: Record, inputs: Record) -> tuple[int, Record, int]:
    """How long all gyro counts have stood still.

    Returns the counter, what the state keeps, and the status bits.
    """
    if not (config["gyro_fitted"] and inputs["gyro_valid"]):
        return 0, {}, 0
    still = state["gyro_known"] and inputs["gyro_raw"] == state["gyro_raw"]
    same = count(state["gyro_same"], UINT16_MAX) if still else 0
    frozen = config["gyro_frozen_limit"] != 0 and same >= config["gyro_frozen_limit"]
    kept = {"gyro_raw": inputs["gyro_raw"], "gyro_known": 1, "gyro_same": same}
    return same, kept, bit(frozen, MRD_S_GYRO_FROZEN)


def follow_on(
    state: Record, config: Record, inputs: Record, field: Vector, norm: int, status: int,
) -> tuple[Record, Record, int]:
    """All four checks. Returns the trace's part, what the state keeps, and the status bits of this stage."""
    same, mag_kept, raised = counts(state, config, inputs, status)
    jump_sq, jump_kept, jumped = jump(state, config, field, inputs["sample_us"], status)
    norm_change, norm_kept, noisy = noise(state, config, norm, status)
    gyro_same, gyro_kept, frozen = gyro_counts(state, config, inputs)
    trace = {
        "same": check3("continuity.same", same),
        "jump_sq": jump_sq,
        "norm_change": norm_change,
        "gyro_same": check("continuity.gyro_same", gyro_same),
    }
    return trace, {**mag_kept, **jump_kept, **norm_kept, **gyro_kept}, raised | jumped | noisy | frozen


def trust(status: int, jumping: int, waive: int) -> int:
    """Whether the sample is used, by the status bits of the first five stages; `jumping`: jumps are taken for a fast tumble."""
    if waive:
        return flag(not status & _REJECTED)
    in_flight = _REJECTED | _WAIVABLE
    return flag(not status & (in_flight if jumping else in_flight | _JUMP))
