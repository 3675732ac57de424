"""One cycle of the controller: integrity, command, path, estimate, progress, transition, pulses, counters."""

from __future__ import annotations

from pyharness.exact.constants import (
    MRD_COMMAND_RESUME,
    MRD_MODE_BENCH,
    MRD_MODE_DAMPING,
    MRD_MODE_HOLD_OFF,
    MRD_MODE_INHIBIT,
    MRD_MODE_PAUSE,
    MRD_MODE_SAFE,
    MRD_MODE_SETTLED,
    MRD_S_BLANKED,
    MRD_S_COIL_CURRENT,
    MRD_S_COMMAND_REFUSED,
    MRD_S_CONFIG_CORRUPT,
    MRD_S_DIVERGING,
    MRD_S_ESTIMATE_FELL_BACK,
    MRD_S_FELL_BACK,
    MRD_S_FIELD_IMPLAUSIBLE,
    MRD_S_GYRO_DISAGREES,
    MRD_S_GYRO_FROZEN,
    MRD_S_GYRO_MISSING,
    MRD_S_GYRO_RANGE,
    MRD_S_INTERVAL_LONG,
    MRD_S_INTERVAL_SHORT,
    MRD_S_MAG_DEAD_AXIS,
    MRD_S_MAG_FROZEN,
    MRD_S_MAG_JUMP,
    MRD_S_MAG_NOISY,
    MRD_S_MAG_RANGE,
    MRD_S_NO_PROGRESS,
    MRD_S_SAMPLE_OFF_TIME,
    MRD_S_STATE_RESTARTED,
    MRD_S_SWITCH_OFF_UNSTAMPED,
)
from pyharness.exact.estimate import estimate
from pyharness.exact.fields import STATE, zeros
from pyharness.exact.integrity import config_digest, state_digest
from pyharness.exact.modes import COMMANDED, MODES, NO_PULSE, Seen, Standing, advance, obey
from pyharness.exact.num import UINT16_MAX, Record, Vector, bit, count, flag
from pyharness.exact.path import (
    path_commit,
    path_drive,
    path_reset,
    path_restore,
    path_sense,
    path_withhold,
    zero_trace,
)
from pyharness.exact.progress import no_progress_yet, watch
from pyharness.exact.ranges import check, check3


def _word(*numbers: int) -> int:
    """The status word with these bits."""
    return sum(1 << number for number in numbers)


# Counters of the cycles in which the status has any of these bits.
_COUNTED = {
    "blanked": _word(MRD_S_BLANKED),
    "fell_back": _word(MRD_S_FELL_BACK),
    "refused": _word(MRD_S_COMMAND_REFUSED),
    "mag_faults": _word(
        MRD_S_MAG_RANGE, MRD_S_FIELD_IMPLAUSIBLE, MRD_S_MAG_FROZEN, MRD_S_MAG_DEAD_AXIS, MRD_S_MAG_JUMP,
        MRD_S_MAG_NOISY),
    "gyro_faults": _word(MRD_S_GYRO_MISSING, MRD_S_GYRO_RANGE, MRD_S_GYRO_FROZEN, MRD_S_GYRO_DISAGREES),
    "coil_faults": _word(MRD_S_COIL_CURRENT, MRD_S_SWITCH_OFF_UNSTAMPED),
    "time_faults": _word(MRD_S_SAMPLE_OFF_TIME, MRD_S_INTERVAL_SHORT, MRD_S_INTERVAL_LONG),
}


def _seal(state: Record) -> Record:
    """The state with the digest of its fields."""
    return {**state, "digest": state_digest(state)}


def reset() -> Record:
    """The state at the start: HOLD_OFF, no sample, no filter, counters 0."""
    return _seal({**zeros(STATE), "mode": MRD_MODE_HOLD_OFF})


def restart(state: Record) -> Record:
    """What is left of a state that failed its digest: what keeps coils off, and the restart is counted."""
    fresh = reset()
    before, mode, inhibit_commanded = state["mode"], MRD_MODE_HOLD_OFF, 0
    if before not in MODES or before in (MRD_MODE_SAFE, MRD_MODE_BENCH):
        mode = MRD_MODE_SAFE
    elif before == MRD_MODE_INHIBIT and state["inhibit_commanded"].bit_count() >= 2:
        mode, inhibit_commanded = MRD_MODE_INHIBIT, COMMANDED
    elif before == MRD_MODE_PAUSE:
        mode = MRD_MODE_PAUSE
    restarts = count(state["counters"]["restarts"], UINT16_MAX)
    return {
        **fresh,
        "mode": mode,
        "inhibit_commanded": inhibit_commanded,
        "counters": {**fresh["counters"], "restarts": restarts},
    }


def command(state: Record, supervisor: Record, inputs: Record) -> tuple[Record, Vector, int]:
    """The state after the command, the bench pulse, and the status bits."""
    before = state["mode"]
    mode, inhibit_commanded, pulse, raised = obey(before, state["inhibit_commanded"], supervisor, inputs)
    path, trips = state["path"], state["trips"]
    if before == MRD_MODE_BENCH and mode != MRD_MODE_BENCH:
        # What was measured while the checks were waived is not used.
        path = {**path, "field_valid": 0, "filter_valid": 0}
    if inputs["command"] == MRD_COMMAND_RESUME and not raised:
        path, trips = path_restore(path), 0
    return {
        **state,
        "path": path,
        "dwell": state["dwell"] if mode == before else 0,
        "mode": mode,
        "inhibit_commanded": inhibit_commanded,
        "trips": trips,
    }, pulse, raised


def tally(counters: Record, trusted: int, diverged: int, status: int) -> Record:
    """The counters after a cycle; each stops at 65535."""
    def raised(name: str, by: int) -> int:
        return count(counters[name], UINT16_MAX) if by else counters[name]

    return {
        **counters,
        "trusted": raised("trusted", trusted),
        "rejected": raised("rejected", not trusted),
        **{name: raised(name, status & word) for name, word in _COUNTED.items()},
        "trips": raised("trips", diverged),
    }


def _commit(
    state: Record, config: Record, inputs: Record, ticks: Vector, status: int, rate: int, rate_valid: int,
    trace: Record,
) -> tuple[Record, Record]:
    """The end of every cycle: the state takes the pulses and its digest, the outputs are put together."""
    cycle = state["cycle"]
    path = path_commit(state["path"], config["path"], inputs["path"], check3("outputs.ticks", ticks))
    state = _seal({**state, "path": path, "cycle": (cycle + 1) % (UINT16_MAX + 1)})
    mode = check("outputs.mode", state["mode"])
    return state, {
        "ticks": ticks,
        "mode": mode,
        "status": check("outputs.status", status),
        "rate": rate,
        "rate_valid": rate_valid,
        "handover": flag(mode == MRD_MODE_SETTLED),
        "cycle": cycle,
        "digest": config["digest"],
        "counters": dict(state["counters"]),
        "trace": trace,
    }


def _make_safe(state: Record, config: Record, inputs: Record, status: int) -> tuple[Record, Record]:
    """The cycle of a configuration that fails its digest: everything off, and of the counters one moves."""
    counters = state["counters"]
    safe = {
        **state,
        "path": path_reset(),
        "dwell": 0,
        "mode": MRD_MODE_SAFE,
        "inhibit_commanded": 0,
        "trips": 0,
        "progress": no_progress_yet(),
        "counters": {**counters, "corrupt": count(counters["corrupt"], UINT16_MAX)},
    }
    return _commit(safe, config, inputs, NO_PULSE, status, 0, 0, zero_trace())


def _pulses(mode: int, path: Record, trace: Record, bench_pulse: Vector) -> Vector:
    """The pulses that leave in this mode."""
    if mode == MRD_MODE_DAMPING:
        return path_withhold(path, trace["pulses"]["ticks"])
    return bench_pulse if mode == MRD_MODE_BENCH else NO_PULSE


def _check_inputs(inputs: Record) -> None:
    for name in ("separation_s", "low_power", "command", "command_key", "command_coil", "command_ticks"):
        check("inputs." + name, inputs[name])


def step(state: Record, config: Record, inputs: Record) -> tuple[Record, Record]:
    """One cycle. Returns the new state and the outputs; the arguments stay as they are.

    Records are dicts with the names of mrd.h, of plain ints and tuples. Raises RangeError where an input does
    not fit its type, or a value leaves its declared range, which no configuration that passed `init` allows.
    """
    _check_inputs(inputs)
    status = 0
    if state["digest"] != state_digest(state):
        status = 1 << MRD_S_STATE_RESTARTED
        state = restart(state)
    if config["digest"] != config_digest(config):
        return _make_safe(state, config, inputs, status | 1 << MRD_S_CONFIG_CORRUPT)
    path_config, supervisor = config["path"], config["supervisor"]
    state, bench_pulse, raised = command(state, supervisor, inputs)
    status |= raised
    waive = flag(state["mode"] == MRD_MODE_BENCH)
    path, trace, raised = path_sense(state["path"], path_config, inputs["path"], waive)
    status |= raised
    part, rate, rate_valid, raised = estimate(supervisor, trace)
    status |= raised
    trace, raised = path_drive(path_config, {**trace, "estimate": part})
    status |= raised
    progress, diverging = state["progress"], 0
    if state["mode"] == MRD_MODE_DAMPING:
        progress, diverging = watch(state["progress"], supervisor, state["trips"], part)
    now = Standing(state["mode"], state["dwell"], state["trips"])
    seen = Seen(rate, rate_valid, status >> MRD_S_ESTIMATE_FELL_BACK & 1, diverging)
    after = advance(now, state["inhibit_commanded"], supervisor, inputs, seen)
    # Where low power comes before it, the row of divergence does not apply.
    diverged = diverging and after.mode in (MRD_MODE_PAUSE, MRD_MODE_SAFE)
    low_power = after.mode == MRD_MODE_INHIBIT and not state["inhibit_commanded"]
    if after.mode not in (MRD_MODE_DAMPING, MRD_MODE_HOLD_OFF) and not low_power:
        progress = no_progress_yet()  # low power once an orbit must not blind the guard
    status |= bit(progress["stalled"], MRD_S_NO_PROGRESS)
    status |= bit(diverged or after.mode == MRD_MODE_PAUSE, MRD_S_DIVERGING)
    new = {
        "path": path,
        "dwell": check("state.dwell", after.dwell),
        "mode": after.mode,
        "inhibit_commanded": state["inhibit_commanded"],
        "trips": check("state.trips", after.trips),
        "cycle": state["cycle"],
        "progress": progress,
        "counters": tally(state["counters"], trace["gate"]["trusted"], diverged, status),
    }
    ticks = _pulses(after.mode, path, trace, bench_pulse)
    return _commit(new, config, inputs, ticks, status, rate, rate_valid, trace)
