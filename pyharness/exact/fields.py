"""The structs of mrd.h as data: every field in declared order, with width, sign and number of elements.

The digests fold over these lists, and whoever packs records for a controller walks them. A record is a
plain dict with the names of the struct's members; an array is a tuple, of ints or of such dicts.
"""

from __future__ import annotations

from typing import NamedTuple

from pyharness.exact.num import Record

AXES = 3


class Field(NamedTuple):
    """A scalar (count 1) or an array of count > 1 fixed-width integers."""

    name: str
    bits: int
    signed: bool
    count: int

    @property
    def lo(self) -> int:
        """The least value that the width can hold."""
        return -(1 << (self.bits - 1)) if self.signed else 0

    @property
    def hi(self) -> int:
        """The greatest value that the width can hold."""
        return (1 << (self.bits - self.signed)) - 1


class Nested(NamedTuple):
    """A struct inside a struct, or an array of count > 1 of them."""

    name: str
    struct: Struct
    count: int = 1


Struct = tuple[Field | Nested, ...]


def i16(name: str, count: int = 1) -> Field:
    return Field(name, 16, True, count)


def i32(name: str, count: int = 1) -> Field:
    return Field(name, 32, True, count)


def u16(name: str, count: int = 1) -> Field:
    return Field(name, 16, False, count)


def u32(name: str, count: int = 1) -> Field:
    return Field(name, 32, False, count)


SENSOR_CONFIG: Struct = (i16("matrix", 9), i16("offset", AXES), u16("shift"), i16("limit"))

GAIN_CONFIG: Struct = (u16("mantissa", AXES), i16("shift", AXES))

PATH_CONFIG: Struct = (
    Nested("mag", SENSOR_CONFIG),
    Nested("gyro", SENSOR_CONFIG),
    u16("gyro_fitted"),
    u16("law"),
    u16("gain_scaling"),
    u16("saturation"),
    u32("norm_min_sq"),
    u32("norm_max_sq"),
    u32("period_us"),
    u32("phase_us"),
    u32("tolerance_us"),
    u32("half_sample_us"),
    u32("delay_us"),
    u32("blanking_us", AXES),
    u16("tick_us"),
    i16("window_ticks"),
    i16("shortest_ticks"),
    i16("polarity", AXES),
    u16("filter_gain"),
    Nested("derivative_gain", GAIN_CONFIG),
    Nested("rate_gain", GAIN_CONFIG),
    u32("jump_max_sq"),
    u16("noise_limit"),
    u16("frozen_limit"),
    u16("dead_limit"),
    u16("gyro_frozen_limit"),
    u16("agree_limit"),
    u16("agree_mantissa"),
    u16("agree_shift"),
    i16("agree_rate_max"),
    u16("current_fitted"),
    i16("current_ticks"),
    i16("current_min", AXES),
    i16("current_off_max"),
)

SUPERVISOR_CONFIG: Struct = (
    u32("settle_dwell"),
    u32("wake_dwell"),
    u32("hold_off_s"),
    u16("settle_by"),
    u16("settled_rate"),
    u16("wake_rate"),
    u16("estimate_mantissa"),
    u16("estimate_shift"),
    u32("window_cycles"),
    u32("pause_cycles"),
    u16("guard_turn"),
    u16("stall_turn"),
    u16("growth"),
    u16("progress"),
    u16("retries"),
    u16("bench_key"),
    i16("bench_limit_ticks"),
)

CONFIG: Struct = (Nested("path", PATH_CONFIG), Nested("supervisor", SUPERVISOR_CONFIG), u32("digest"))

PATH_INPUTS: Struct = (
    u32("cycle_start_us"),
    u32("sample_us"),
    u32("switch_off_us", AXES),
    i16("mag_raw", AXES),
    i16("gyro_raw", AXES),
    u16("mag_valid"),
    u16("gyro_valid"),
    u16("current_valid"),
    i16("current_driven", AXES),
    i16("current_sampled", AXES),
)

INPUTS: Struct = (
    Nested("path", PATH_INPUTS),
    u32("separation_s"),
    u16("low_power"),
    u16("command"),
    u16("command_key"),
    u16("command_coil"),
    i16("command_ticks"),
)

BALLOT: Struct = (u16("level"), u16("tripped"))

PATH_STATE: Struct = (
    i32("filter", AXES),
    u32("sample_us"),
    u32("switch_off_us", AXES),
    u32("drive_us", AXES),
    i16("field", AXES),
    u16("field_valid"),
    u16("filter_valid"),
    u16("off_known"),
    u16("off_clear", AXES),
    u16("pending", AXES),
    i16("ticks", AXES),
    i16("mag_raw", AXES),
    u16("mag_known"),
    u16("mag_same", AXES),
    u16("norm"),
    u16("norm_known"),
    Nested("noise", BALLOT),
    Nested("jumping", BALLOT),
    i16("gyro_raw", AXES),
    u16("gyro_known"),
    u16("gyro_same"),
    i16("rate", AXES),
    u16("rate_known"),
    Nested("agreement", BALLOT),
    Nested("weak", BALLOT, AXES),
    Nested("backward", BALLOT, AXES),
)

PROGRESS: Struct = (u32("window"), u16("peak", AXES), u16("least"), u16("in_four"), u16("stalled"))

COUNTERS: Struct = (
    u16("trusted"),
    u16("rejected"),
    u16("blanked"),
    u16("fell_back"),
    u16("refused"),
    u16("restarts"),
    u16("corrupt"),
    u16("mag_faults"),
    u16("gyro_faults"),
    u16("coil_faults"),
    u16("time_faults"),
    u16("trips"),
)

STATE: Struct = (
    Nested("path", PATH_STATE),
    u32("dwell"),
    u16("mode"),
    u16("inhibit_commanded"),
    u16("trips"),
    u16("cycle"),
    Nested("progress", PROGRESS),
    Nested("counters", COUNTERS),
    u32("digest"),
)

TRACE: Struct = (
    Nested("calibration", (i16("field", AXES), i16("rate", AXES), u16("rate_valid"))),
    Nested("plausibility", (u32("norm_sq"), u16("norm"))),
    Nested("currents", (u16("fault", AXES),)),
    Nested("gate", (u32("age_us", AXES), u16("trusted"))),
    Nested("continuity", (u16("same", AXES), u32("jump_sq"), u16("norm_change"), u16("gyro_same"))),
    Nested("derivative", (u32("interval_us"), u16("factor"), i16("derivative", AXES), u16("valid"))),
    Nested("low_pass", (i32("filter", AXES), i16("filtered", AXES))),
    Nested("agreement", (u16("judged"), i32("residual", AXES))),
    Nested("law", (
        u16("active"), i32("cross", AXES), u16("mantissa", AXES), i16("shift", AXES), i32("demand", AXES),
    )),
    Nested("saturation", (i16("command", AXES),)),
    Nested("pulses", (i16("ticks", AXES),)),
    Nested("estimate", (u16("turn"), u16("across"), u16("across_valid"))),
)

OUTPUTS: Struct = (
    i16("ticks", AXES),
    u16("mode"),
    u32("status"),
    u16("rate"),
    u16("rate_valid"),
    u16("handover"),
    u16("cycle"),
    u32("digest"),
    Nested("counters", COUNTERS),
    Nested("trace", TRACE),
)


def flatten(struct: Struct, prefix: str = "") -> tuple[Field, ...]:
    """Every field in declared order, nested names joined by dots: `path.weak[0].level`."""
    flat: list[Field] = []
    for entry in struct:
        name = prefix + entry.name
        if isinstance(entry, Field):
            flat.append(entry._replace(name=name))
        elif entry.count == 1:
            flat.extend(flatten(entry.struct, f"{name}."))
        else:
            for i in range(entry.count):
                flat.extend(flatten(entry.struct, f"{name}[{i}]."))
    return tuple(flat)


FIELDS = {
    "config": flatten(CONFIG),
    "inputs": flatten(INPUTS),
    "state": flatten(STATE),
    "outputs": flatten(OUTPUTS),
}


def zeros(struct: Struct) -> Record:
    """A record of this struct with 0 everywhere."""
    record: Record = {}
    for entry in struct:
        zero = zeros(entry.struct) if isinstance(entry, Nested) else 0
        record[entry.name] = zero if entry.count == 1 else (zero,) * entry.count
    return record
