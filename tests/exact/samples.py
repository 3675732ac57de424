"""A small configuration whose numbers can be followed by hand, and inputs for it.

Counts pass calibration unchanged, gains are 1, period 100 ms, sample 38 to 42 ms into the cycle, window of
5000 ticks of 10 us. Continuity, agreement, currents and progress say nothing unless a test has them look.
"""

from __future__ import annotations

from typing import Any

from pyharness.exact import config_digest, path_reset, reset, state_digest, step
from pyharness.exact.constants import (
    MRD_GAIN_CONSTANT,
    MRD_LAW_DERIVATIVE,
    MRD_MODE_DAMPING,
    MRD_MODE_HOLD_OFF,
    MRD_SATURATE_PER_AXIS,
    MRD_SETTLE_BY_FIELD,
)

Record = dict[str, Any]

PERIOD = 100_000
FIELD = (10_000, -5_000, 2_000)
SENSOR = {"matrix": (2, 0, 0, 0, 2, 0, 0, 0, 2), "offset": (0, 0, 0), "shift": 1, "limit": 32767}
GAIN = {"mantissa": (32768,) * 3, "shift": (15,) * 3}

PATH = {
    "mag": SENSOR,
    "gyro": SENSOR,
    "gyro_fitted": 1,
    "law": MRD_LAW_DERIVATIVE,
    "gain_scaling": MRD_GAIN_CONSTANT,
    "saturation": MRD_SATURATE_PER_AXIS,
    "norm_min_sq": 32768,
    "norm_max_sq": 3221028867,
    "period_us": PERIOD,
    "phase_us": 40_000,
    "tolerance_us": 500,
    "half_sample_us": 2_000,
    "delay_us": 5_000,
    "blanking_us": (40_000, 41_000, 43_000),
    "tick_us": 10,
    "window_ticks": 5_000,
    "shortest_ticks": 2,
    "polarity": (1, 1, -1),
    "filter_gain": 32768,
    "derivative_gain": GAIN,
    "rate_gain": GAIN,
    "jump_max_sq": 3221028867,
    "noise_limit": 65535,
    "frozen_limit": 0,
    "dead_limit": 0,
    "gyro_frozen_limit": 0,
    "agree_limit": 0,
    "agree_mantissa": 32768,
    "agree_shift": 1,
    "agree_rate_max": 32767,
    "current_fitted": 0,
    "current_ticks": 100,
    "current_min": (400, 500, 600),
    "current_off_max": 10,
}
SUPERVISOR = {
    "settle_dwell": 3,
    "wake_dwell": 2,
    "hold_off_s": 600,
    "settle_by": MRD_SETTLE_BY_FIELD,
    "settled_rate": 100,
    "wake_rate": 200,
    "estimate_mantissa": 32768,
    "estimate_shift": 15,
    "window_cycles": 2**32 - 1,
    "pause_cycles": 3,
    "guard_turn": 250,
    "stall_turn": 100,
    "growth": 512,
    "progress": 128,
    "retries": 2,
    "bench_key": 4242,
    "bench_limit_ticks": 1_000,
}


def with_changes(record: Record, changes: Record) -> Record:
    """The record with fields replaced; a dotted name reaches into nested records: `path.weak[0].level`."""
    record = dict(record)
    for name, value in changes.items():
        head, _, rest = name.partition(".")
        if head.endswith("]"):
            head, i = head[:-1].split("[")
            elements = list(record[head])
            elements[int(i)] = with_changes(elements[int(i)], {rest: value})
            record[head] = tuple(elements)
        else:
            record[head] = with_changes(record[head], {rest: value}) if rest else value
    return record


def lookup(record: Record, name: str) -> Any:
    """The value under a dotted name."""
    for part in name.split("."):
        head, _, i = part.removesuffix("]").partition("[")
        record = record[head][int(i)] if i else record[head]
    return record


def path_config(**changes: Any) -> Record:
    return with_changes(PATH, changes)


def make_config(changes: Record | None = None) -> Record:
    """The sample configuration with dotted changes and the right digest."""
    config = with_changes({"path": PATH, "supervisor": SUPERVISOR}, changes or {})
    return {**config, "digest": config_digest(config)}


def path_inputs(cycle: int = 1, **changes: Any) -> Record:
    """A sample at its place, coils off for 48 ms at its start."""
    start = 1_000_000 + cycle * PERIOD
    return {
        "cycle_start_us": start % 2**32,
        "sample_us": (start + 40_000) % 2**32,
        "switch_off_us": ((start - 10_000) % 2**32,) * 3,
        "mag_raw": FIELD,
        "gyro_raw": (0, 0, 0),
        "mag_valid": 1,
        "gyro_valid": 1,
        "current_valid": 1,
        "current_driven": (0, 0, 0),
        "current_sampled": (0, 0, 0),
        **changes,
    }


def make_inputs(cycle: int = 1, changes: Record | None = None) -> Record:
    """Inputs after the hold-off, without a command, with dotted changes."""
    return with_changes({
        "path": path_inputs(cycle), "separation_s": 600, "low_power": 0,
        "command": 0, "command_key": 0, "command_coil": 0, "command_ticks": 0,
    }, changes or {})


def path_state(**changes: Any) -> Record:
    """A path that has seen a cycle: it knows the stamps of the coils."""
    return {**path_reset(), "off_known": 1, **changes}


def make_state(changes: Record | None = None) -> Record:
    """A state in DAMPING that knows the stamps, with dotted changes and the right digest."""
    state = with_changes({**reset(), "path": path_state(), "mode": MRD_MODE_DAMPING}, changes or {})
    return {**state, "digest": state_digest(state)}


def fly(config: Record, sequence: list[Record], state: Record | None = None) -> tuple[Record, list[Record]]:
    """State and outputs after a sequence of inputs; by default from a start that knows the coils' stamps."""
    state, outputs = state or make_state({"mode": MRD_MODE_HOLD_OFF}), []
    for inputs in sequence:
        state, out = step(state, config, inputs)
        outputs.append(out)
    return state, outputs
