"""The path: counts and stamps to pulses, without modes, counters or digests."""

from __future__ import annotations

from pyharness.exact.agreement import agree
from pyharness.exact.ballot import clear_ballot
from pyharness.exact.calibration import calibrate
from pyharness.exact.constants import MRD_LAW_NONE, MRD_S_GYRO_DISAGREES, MRD_S_GYRO_FROZEN
from pyharness.exact.continuity import follow_on, trust
from pyharness.exact.currents import judge
from pyharness.exact.derivative import differentiate
from pyharness.exact.fields import PATH_STATE, TRACE, zeros
from pyharness.exact.gate import admit
from pyharness.exact.law import command_demand
from pyharness.exact.low_pass import smooth
from pyharness.exact.num import WRAP, Record, Vector, select, vmax
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
    check("inputs.path.mag_valid", inputs["mag_valid"])
    check("inputs.path.gyro_valid", inputs["gyro_valid"])
    check("inputs.path.current_valid", inputs["current_valid"])
    check3("inputs.path.current_driven", inputs["current_driven"])
    check3("inputs.path.current_sampled", inputs["current_sampled"])


def _usable(calibration: Record, status: int, doubt: int) -> Record:
    """The calibration's part of the trace, its rate not valid where the status holds this bit."""
    return {**calibration, "rate_valid": select(status >> doubt & 1, 0, calibration["rate_valid"])}


def path_sense(state: Record, config: Record, inputs: Record, waive: int) -> tuple[Record, Record, int]:
    """Stages 1 to 8. Returns the new state, the trace with its parts up to agreement, and the status bits.

    Where `waive` is not 0, an implausible, frozen, dead, jumping or noisy field is reported but does not
    reject the sample. The arguments are the structs of the path alone. Raises RangeError where an input does
    not fit its type, or a value leaves its declared range, which no legal configuration allows.
    """
    _check_inputs(inputs)
    calibration, status = calibrate(config, inputs)
    field = calibration["field"]
    plausibility, raised = assess(config, field, status)
    status |= raised
    currents, on, ballots, raised = judge(state, config, inputs)
    status |= raised
    age_us, coils, raised = admit(state, config, inputs, on, status)
    status |= raised
    continuity, followed, raised = follow_on(state, config, inputs, field, plausibility["norm"], status)
    status |= raised
    calibration = _usable(calibration, status, MRD_S_GYRO_FROZEN)
    jumping = followed.get("jumping", state["jumping"])["tripped"]
    trusted = trust(status, jumping, waive)
    derivative, raised = differentiate(state, config, field, inputs["sample_us"], trusted)
    status |= raised
    low_pass = smooth(state, config, derivative)
    agreement, compared, raised = agree(state, config, calibration, derivative, status)
    status |= raised
    new = {
        **state,
        **ballots,
        **coils,
        **followed,
        **compared,
        "filter": low_pass["filter"] if derivative["valid"] else state["filter"],
        "sample_us": inputs["sample_us"] if trusted else state["sample_us"],
        "field": field if trusted else state["field"],
        "field_valid": trusted,
        "filter_valid": derivative["valid"],
    }
    trace = {
        **zero_trace(),
        "calibration": _usable(calibration, status, MRD_S_GYRO_DISAGREES),
        "plausibility": plausibility,
        "currents": currents,
        "gate": {"age_us": age_us, "trusted": trusted},
        "continuity": continuity,
        "derivative": derivative,
        "low_pass": low_pass,
        "agreement": agreement,
    }
    return new, trace, status


def path_drive(config: Record, trace: Record) -> tuple[Record, int]:
    """Stages 9 to 11, from what path_sense left in a trace. Returns the whole trace and the status bits."""
    law, status = command_demand(config, trace)
    saturation = {"command": (0, 0, 0)}
    pulses = {"ticks": (0, 0, 0)}
    if law["active"] != MRD_LAW_NONE:
        saturation, raised = saturate(config, law["demand"])
        status |= raised
        pulses, raised = make_pulses(config, saturation["command"])
        status |= raised
    return {**trace, "law": law, "saturation": saturation, "pulses": pulses}, status


def path_withhold(state: Record, ticks: Vector) -> Vector:
    """The pulses, 0 for each coil that is out of use."""
    x, y, z = ticks
    out_x, out_y, out_z = (ballot["tripped"] for ballot in state["backward"])
    return select(out_x, 0, x), select(out_y, 0, y), select(out_z, 0, z)


def path_restore(state: Record) -> Record:
    """The state with every coil given back that was taken out of use."""
    clear = (clear_ballot(),) * 3
    return {**state, "weak": clear, "backward": clear}


def path_commit(state: Record, config: Record, inputs: Record, ticks: Vector) -> Record:
    """The state that keeps the pulses really to be made in this cycle and waits for the end of each."""
    earliest = vmax(0, config["phase_us"] + config["delay_us"] - config["tolerance_us"])
    opens = (inputs["cycle_start_us"] + earliest) % WRAP
    drive_x, drive_y, drive_z = state["drive_us"]
    pending_x, pending_y, pending_z = state["pending"]
    x, y, z = check3("commit.ticks", ticks)
    drive_us = (
        select(x != 0, opens, drive_x),
        select(y != 0, opens, drive_y),
        select(z != 0, opens, drive_z),
    )
    pending = (select(x != 0, 1, pending_x), select(y != 0, 1, pending_y), select(z != 0, 1, pending_z))
    return {**state, "ticks": ticks, "drive_us": check3("state.path.drive_us", drive_us), "pending": pending}
