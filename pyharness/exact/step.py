"""One cycle of the controller: integrity, command, path, estimate, transition, pulses, counters."""

from __future__ import annotations

from pyharness.exact.constants import (
    MRD_MODE_BENCH,
    MRD_MODE_DAMPING,
    MRD_MODE_HOLD_OFF,
    MRD_MODE_INHIBIT,
    MRD_MODE_SAFE,
    MRD_MODE_SETTLED,
    MRD_S_BLANKED,
    MRD_S_COMMAND_REFUSED,
    MRD_S_CONFIG_CORRUPT,
    MRD_S_ESTIMATE_FELL_BACK,
    MRD_S_FELL_BACK,
    MRD_S_STATE_RESTARTED,
)
from pyharness.exact.estimate import estimate
from pyharness.exact.fields import STATE, zeros
from pyharness.exact.integrity import config_digest, state_digest
from pyharness.exact.modes import COMMANDED, MODES, NO_PULSE, advance, obey
from pyharness.exact.num import UINT16_MAX, Record, Vector, count, flag
from pyharness.exact.path import path_commit, path_drive, path_reset, path_sense, zero_trace
from pyharness.exact.ranges import check, check3


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
    elif before == MRD_MODE_INHIBIT and state["inhibit_commanded"]:
        mode, inhibit_commanded = MRD_MODE_INHIBIT, COMMANDED
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
    path = state["path"]
    if before == MRD_MODE_BENCH and mode != MRD_MODE_BENCH:
        # What was measured while the norm was waived is not used.
        path = {**path, "field_valid": 0, "filter_valid": 0}
    dwell = state["dwell"] if mode == before else 0
    new = {**state, "path": path, "dwell": dwell, "mode": mode, "inhibit_commanded": inhibit_commanded}
    return new, pulse, raised


def tally(counters: Record, trusted: int, status: int) -> Record:
    """The counters after a cycle; each stops at 65535."""
    def raised(name: str, by: int) -> int:
        return count(counters[name], UINT16_MAX) if by else counters[name]

    return {
        "trusted": raised("trusted", trusted),
        "rejected": raised("rejected", not trusted),
        "blanked": raised("blanked", status >> MRD_S_BLANKED & 1),
        "fell_back": raised("fell_back", status >> MRD_S_FELL_BACK & 1),
        "refused": raised("refused", status >> MRD_S_COMMAND_REFUSED & 1),
        "restarts": counters["restarts"],
    }


def _commit(
    state: Record, config: Record, inputs: Record, ticks: Vector, status: int, rate: int, rate_valid: int,
    trace: Record,
) -> tuple[Record, Record]:
    """The end of every cycle: the state takes the pulses and its digest, the outputs are put together."""
    state = _seal({**state, "path": path_commit(state["path"], config["path"], inputs["path"], ticks)})
    mode = check("outputs.mode", state["mode"])
    return state, {
        "ticks": check3("outputs.ticks", ticks),
        "mode": mode,
        "status": check("outputs.status", status),
        "rate": rate,
        "rate_valid": rate_valid,
        "handover": flag(mode == MRD_MODE_SETTLED),
        "digest": config["digest"],
        "counters": dict(state["counters"]),
        "trace": trace,
    }


def _make_safe(state: Record, config: Record, inputs: Record, status: int) -> tuple[Record, Record]:
    """The cycle of a configuration that fails its digest: everything off, counters as they are."""
    safe = {**state, "path": path_reset(), "dwell": 0, "mode": MRD_MODE_SAFE, "inhibit_commanded": 0}
    return _commit(safe, config, inputs, NO_PULSE, status, 0, 0, zero_trace())


def _check_inputs(inputs: Record) -> None:
    for name in ("separation_s", "low_power", "command", "command_key", "command_coil", "command_ticks"):
        check("inputs." + name, inputs[name])


def step(state: Record, config: Record, inputs: Record) -> tuple[Record, Record]:
    """One cycle. Returns the new state and the outputs; the arguments stay as they are.

    Records are dicts with the names of mrd.h, of plain ints and tuples of ints. Raises RangeError where an
    input does not fit its type, or a value leaves its declared range, which no configuration that passed
    `init` allows.
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
    waive_norm = flag(state["mode"] == MRD_MODE_BENCH)
    path, trace, raised = path_sense(state["path"], path_config, inputs["path"], waive_norm)
    status |= raised
    rate, rate_valid, raised = estimate(supervisor, trace)
    status |= raised
    trace, raised = path_drive(path_config, trace)
    status |= raised
    mode, dwell = advance(
        state["mode"], state["inhibit_commanded"], state["dwell"], supervisor, inputs, rate, rate_valid,
        status >> MRD_S_ESTIMATE_FELL_BACK & 1)
    ticks = NO_PULSE
    if mode == MRD_MODE_DAMPING:
        ticks = trace["pulses"]["ticks"]
    elif mode == MRD_MODE_BENCH:
        ticks = bench_pulse
    new = {
        "path": path,
        "dwell": check("state.dwell", dwell),
        "mode": mode,
        "inhibit_commanded": state["inhibit_commanded"],
        "counters": tally(state["counters"], trace["gate"]["trusted"], status),
    }
    return _commit(new, config, inputs, ticks, status, rate, rate_valid, trace)
