"""The path: counts and stamps to pulses, without modes, counters or digests."""

from __future__ import annotations

from pyharness.exact.calibration import calibrate
from pyharness.exact.constants import MRD_LAW_NONE
from pyharness.exact.derivative import differentiate
from pyharness.exact.fields import PATH_STATE, TRACE, zeros
from pyharness.exact.gate import admit
from pyharness.exact.law import command_demand
from pyharness.exact.low_pass import smooth
from pyharness.exact.num import WRAP, Record, Vector, select
from pyharness.exact.plausibility import assess
from pyharness.exact.pulses import make_pulses
from pyharness.exact.ranges import check, check3
from pyharness.exact.saturation import saturate


def path_reset() -> Record:
    """The state of a path at its start: no sample, no filter, no stamps."""
    return zeros(PATH_STATE)


def zero_trace() -> Record:
    """A trace of zeros: no stage reached."""
    return zeros(TRACE)


def _check_inputs(inputs: Record) -> None:
    check("inputs.path.cycle_start_us", inputs["cycle_start_us"])
    check("inputs.path.sample_us", inputs["sample_us"])
    check3("inputs.path.switch_off_us", inputs["switch_off_us"])
    check3("inputs.path.mag_raw", inputs["mag_raw"])
    check3("inputs.path.gyro_raw", inputs["gyro_raw"])


def path_sense(state: Record, config: Record, inputs: Record, waive_norm: int) -> tuple[Record, Record, int]:
    """Stages 1 to 5. Returns the new state, the trace with its first five parts, and the status bits.

    The arguments are the structs of the path alone. Raises RangeError where an input does not fit its type,
    or a value leaves its declared range, which no legal configuration allows.
    """
    _check_inputs(inputs)
    calibration, status = calibrate(config, inputs)
    field = calibration["field"]
    plausibility, raised = assess(config, field, status)
    status |= raised
    gate, coils, raised = admit(state, config, inputs, status, waive_norm)
    status |= raised
    trusted = gate["trusted"]
    derivative, raised = differentiate(state, config, field, inputs["sample_us"], trusted)
    status |= raised
    low_pass = smooth(state, config, derivative)
    new = {
        **state,
        **coils,
        "filter": low_pass["filter"] if derivative["valid"] else state["filter"],
        "sample_us": inputs["sample_us"] if trusted else state["sample_us"],
        "field": field if trusted else state["field"],
        "field_valid": trusted,
        "filter_valid": derivative["valid"],
    }
    trace = {
        **zero_trace(),
        "calibration": calibration,
        "plausibility": plausibility,
        "gate": gate,
        "derivative": derivative,
        "low_pass": low_pass,
    }
    return new, trace, status


def path_drive(config: Record, trace: Record) -> tuple[Record, int]:
    """Stages 6 to 8, from the first five parts of a trace. Returns the whole trace and the status bits."""
    law, status = command_demand(config, trace)
    saturation = {"command": (0, 0, 0)}
    pulses = {"ticks": (0, 0, 0)}
    if law["active"] != MRD_LAW_NONE:
        saturation, raised = saturate(config, law["demand"])
        status |= raised
        pulses, raised = make_pulses(config, saturation["command"])
        status |= raised
    return {**trace, "law": law, "saturation": saturation, "pulses": pulses}, status


def path_commit(state: Record, config: Record, inputs: Record, ticks: Vector) -> Record:
    """The state that waits for the switch-off of every pulse that is really to be made in this cycle."""
    opens = (inputs["cycle_start_us"] + config["phase_us"] + config["delay_us"]) % WRAP
    drive_x, drive_y, drive_z = state["drive_us"]
    pending_x, pending_y, pending_z = state["pending"]
    x, y, z = check3("commit.ticks", ticks)
    drive_us = (
        select(x != 0, opens, drive_x),
        select(y != 0, opens, drive_y),
        select(z != 0, opens, drive_z),
    )
    pending = (select(x != 0, 1, pending_x), select(y != 0, 1, pending_y), select(z != 0, 1, pending_z))
    return {**state, "drive_us": check3("state.path.drive_us", drive_us), "pending": pending}
