"""Every mode with every command, low power and separation, from a table written from the one in mrd.h."""

from itertools import product

import pytest
from exact.samples import FIELD, SUPERVISOR, fly, make_config, make_inputs, make_state, with_changes

from pyharness.exact.constants import (
    MRD_COMMAND_ARM,
    MRD_COMMAND_BENCH,
    MRD_COMMAND_INHIBIT,
    MRD_COMMAND_NONE,
    MRD_COMMAND_RESUME,
    MRD_COMMAND_SAFE,
    MRD_MODE_BENCH,
    MRD_MODE_DAMPING,
    MRD_MODE_HOLD_OFF,
    MRD_MODE_INHIBIT,
    MRD_MODE_PAUSE,
    MRD_MODE_SAFE,
    MRD_MODE_SETTLED,
    MRD_S_COMMAND_REFUSED,
    MRD_S_DIVERGING,
    MRD_S_ESTIMATE_FELL_BACK,
    MRD_S_FIELD_IMPLAUSIBLE,
    MRD_S_NO_PREVIOUS,
    MRD_SETTLE_BY_FIELD,
    MRD_SETTLE_BY_GYRO,
)
from pyharness.exact.modes import MODES, Seen, Standing, advance

HOLD_OFF, DAMPING, SETTLED = MRD_MODE_HOLD_OFF, MRD_MODE_DAMPING, MRD_MODE_SETTLED
SAFE, INHIBIT, BENCH, PAUSE = MRD_MODE_SAFE, MRD_MODE_INHIBIT, MRD_MODE_BENCH, MRD_MODE_PAUSE

# Mode (with a dwell of 1) and command, then the mode after the step in four situations:
# power good and early, power good and separated, low power and early, low power and separated. None: refused.
NONE_ROWS = {
    HOLD_OFF: (HOLD_OFF, DAMPING, INHIBIT, INHIBIT),
    DAMPING: (DAMPING, DAMPING, INHIBIT, INHIBIT),
    SETTLED: (SETTLED,) * 4,
    SAFE: (SAFE, SAFE, SAFE, SAFE),
    INHIBIT: (HOLD_OFF, HOLD_OFF, INHIBIT, INHIBIT),
    BENCH: (BENCH, BENCH, BENCH, BENCH),
    PAUSE: (PAUSE,) * 4,
}
STAY_SAFE, STAY_INHIBITED = (SAFE,) * 4, (INHIBIT,) * 4
RESUMED = (HOLD_OFF, HOLD_OFF, INHIBIT, INHIBIT)
ACCEPTED = {
    **{(mode, MRD_COMMAND_NONE): row for mode, row in NONE_ROWS.items()},
    **{(mode, MRD_COMMAND_SAFE): STAY_SAFE for mode in MODES},
    (HOLD_OFF, MRD_COMMAND_INHIBIT): STAY_INHIBITED,
    (DAMPING, MRD_COMMAND_INHIBIT): STAY_INHIBITED,
    (SETTLED, MRD_COMMAND_INHIBIT): STAY_INHIBITED,
    (PAUSE, MRD_COMMAND_INHIBIT): STAY_INHIBITED,
    (INHIBIT, MRD_COMMAND_INHIBIT): STAY_INHIBITED,
    (SAFE, MRD_COMMAND_RESUME): RESUMED,
    (INHIBIT, MRD_COMMAND_RESUME): RESUMED,
    (BENCH, MRD_COMMAND_RESUME): RESUMED,
    (PAUSE, MRD_COMMAND_RESUME): RESUMED,
    (SAFE, MRD_COMMAND_ARM): (BENCH,) * 4,
    (BENCH, MRD_COMMAND_BENCH): (BENCH, BENCH, None, None),
}
SITUATIONS = tuple(product((0, 1), (599, 600)))
PULSE = {"command_key": 4242, "command_coil": 1, "command_ticks": -7}


def one(state=None, inputs=None, config=None):
    """State and outputs of one step."""
    after, (out,) = fly(make_config(config), [make_inputs(changes=inputs)], make_state(state))
    return after, out


def dwell_after(before, after, separation_s):
    """Of a step that began with 1, whose sample is the first: no rate is known."""
    if after == HOLD_OFF:  # where it stays, or came in by way of INHIBIT or RESUME
        return int(separation_s == 600)
    if after == PAUSE:
        return 2
    return int(before == after)


@pytest.mark.parametrize("command", range(12))
@pytest.mark.parametrize("mode", MODES)
def test_mode_table(mode, command):
    row = ACCEPTED.get((mode, command), (None,) * 4)
    for (low_power, separation_s), expected, unaided in zip(SITUATIONS, row, NONE_ROWS[mode]):
        state, out = one({"mode": mode, "dwell": 1}, {
            "low_power": low_power, "separation_s": separation_s, "command": command, **PULSE})
        refused = expected is None
        assert out["mode"] == state["mode"] == (unaided if refused else expected)
        paused = out["mode"] == PAUSE
        assert out["status"] == (
            1 << MRD_S_NO_PREVIOUS | refused << MRD_S_COMMAND_REFUSED | paused << MRD_S_DIVERGING)
        assert state["counters"]["refused"] == refused
        assert state["inhibit_commanded"] == 65535 * (command == MRD_COMMAND_INHIBIT and not refused)
        assert out["ticks"] == ((0, -7, 0) if command == MRD_COMMAND_BENCH and not refused else (0, 0, 0))
        assert out["handover"] == (out["mode"] == SETTLED)
        resumed = command == MRD_COMMAND_RESUME and not refused
        assert state["dwell"] == dwell_after(HOLD_OFF if resumed else mode, out["mode"], separation_s)


@pytest.mark.parametrize("command", range(12))
def test_a_commanded_inhibit_stays_until_it_is_lifted(command):
    for low_power, separation_s in SITUATIONS:
        state, out = one({"mode": INHIBIT, "inhibit_commanded": 65535}, {
            "low_power": low_power, "separation_s": separation_s, "command": command, **PULSE})
        if command == MRD_COMMAND_SAFE:
            expected = SAFE
        elif command == MRD_COMMAND_RESUME:
            expected = INHIBIT if low_power else HOLD_OFF
        else:
            expected = INHIBIT
        assert out["mode"] == expected
        assert state["inhibit_commanded"] == 65535 * (command not in (MRD_COMMAND_SAFE, MRD_COMMAND_RESUME))


@pytest.mark.parametrize("mode", [0, 1, 2, 4, 7, 11, 13, 14, 65535])
def test_a_value_that_is_no_mode_counts_as_safe(mode):
    assert one({"mode": mode})[1]["mode"] == SAFE
    assert one({"mode": mode}, {"command": MRD_COMMAND_RESUME})[1]["mode"] == HOLD_OFF
    assert one({"mode": mode}, {"command": MRD_COMMAND_INHIBIT})[1]["status"] >> MRD_S_COMMAND_REFUSED & 1


@pytest.mark.parametrize(("key", "mode"), [(4242, BENCH), (4241, SAFE), (0, SAFE), (4243, SAFE)])
def test_arming_needs_the_key(key, mode):
    _, out = one({"mode": SAFE}, {"command": MRD_COMMAND_ARM, "command_key": key})
    assert (out["mode"], out["status"] >> MRD_S_COMMAND_REFUSED & 1) == (mode, mode == SAFE)


@pytest.mark.parametrize(("changes", "ticks"), [
    ({"command_coil": 0, "command_ticks": 1}, (1, 0, 0)),
    ({"command_coil": 2, "command_ticks": 1000}, (0, 0, 1000)),  # coil current: no polarity
    ({"command_coil": 2, "command_ticks": -1000}, (0, 0, -1000)),
    ({"command_coil": 3, "command_ticks": 1}, None),
    ({"command_coil": 65535, "command_ticks": 1}, None),
    ({"command_coil": 0, "command_ticks": 0}, None),
    ({"command_coil": 0, "command_ticks": 1001}, None),
    ({"command_coil": 0, "command_ticks": -1001}, None),
    ({"command_coil": 0, "command_ticks": -32768}, None),
    ({"command_coil": 0, "command_ticks": 1, "low_power": 1}, None),
])
def test_limits_of_a_bench_pulse(changes, ticks):
    state, out = one({"mode": BENCH}, {"command": MRD_COMMAND_BENCH, **changes})
    assert out["mode"] == BENCH
    assert out["ticks"] == (ticks or (0, 0, 0))
    assert state["path"]["pending"] == tuple(int(n != 0) for n in out["ticks"])
    assert out["status"] >> MRD_S_COMMAND_REFUSED & 1 == (ticks is None)


def test_a_bench_pulse_lasts_one_cycle():
    sequence = [make_inputs(1, {"command": MRD_COMMAND_BENCH, **PULSE}), make_inputs(2)]
    _, outputs = fly(make_config(), sequence, make_state({"mode": BENCH}))
    assert [out["ticks"] for out in outputs] == [(0, -7, 0), (0, 0, 0)]


def test_on_the_bench_the_norm_is_waived_and_no_pulse_of_the_law_leaves():
    config = {"path.norm_max_sq": 32768}
    sequence = [make_inputs(1), make_inputs(2, {"path.mag_raw": tuple(x + 100 for x in FIELD)})]
    for mode, trusted in ((BENCH, 1), (SAFE, 0)):
        _, outputs = fly(make_config(config), sequence, make_state({"mode": mode}))
        assert [out["trace"]["gate"]["trusted"] for out in outputs] == [trusted] * 2
        assert all(out["status"] >> MRD_S_FIELD_IMPLAUSIBLE & 1 for out in outputs)
        assert any(outputs[1]["trace"]["pulses"]["ticks"]) == trusted and outputs[1]["ticks"] == (0, 0, 0)


@pytest.mark.parametrize(("mode", "command", "key", "trusted"), [
    (SAFE, MRD_COMMAND_ARM, 4242, 1), (SAFE, MRD_COMMAND_ARM, 4241, 0), (BENCH, MRD_COMMAND_NONE, 0, 1),
    (BENCH, MRD_COMMAND_INHIBIT, 0, 1), (BENCH, MRD_COMMAND_SAFE, 0, 0), (BENCH, MRD_COMMAND_RESUME, 0, 0),
])
def test_the_norm_is_waived_by_the_mode_that_the_command_left(mode, command, key, trusted):
    _, out = one({"mode": mode}, {"command": command, "command_key": key}, {"path.norm_max_sq": 32768})
    assert out["trace"]["gate"]["trusted"] == trusted == (out["mode"] == BENCH)


@pytest.mark.parametrize("command", [MRD_COMMAND_RESUME, MRD_COMMAND_SAFE])
def test_leaving_the_bench_forgets_the_field_and_the_filter(command):
    sequence = [make_inputs(i, {"path.mag_raw": (10_000 + 100 * i, -5_000, 2_000)}) for i in range(5)]
    state, outputs = fly(make_config(), sequence[:2], make_state({"mode": BENCH}))
    assert outputs[1]["trace"]["derivative"]["valid"] and state["path"]["filter_valid"]
    left = with_changes(sequence[2], {"command": command})
    state, (out,) = fly(make_config(), [left], state)
    assert out["status"] == 1 << MRD_S_NO_PREVIOUS and out["ticks"] == (0, 0, 0)
    assert (out["trace"]["derivative"]["valid"], state["path"]["filter_valid"]) == (0, 0)
    assert state["path"]["field_valid"] == 1  # by the sample of this cycle
    _, (out,) = fly(make_config(), [sequence[3]], state)  # the second cycle of HOLD_OFF
    assert out["trace"]["law"]["active"] and any(out["ticks"]) == (command == MRD_COMMAND_RESUME)


def test_staying_on_the_bench_keeps_the_field():
    sequence = [make_inputs(1), make_inputs(2, {"command": MRD_COMMAND_INHIBIT}),
        make_inputs(3, {"command": MRD_COMMAND_BENCH, **PULSE})]
    _, outputs = fly(make_config(), sequence, make_state({"mode": BENCH}))
    assert [out["trace"]["derivative"]["valid"] for out in outputs] == [0, 1, 1]


def test_resuming_with_an_implausible_sample_makes_no_pulse():
    config = make_config({"path.norm_max_sq": 130_000_000})  # the sample's field has 129 000 000
    turned = {"path.mag_raw": (10_100, -5_000, 2_000)}
    state, _ = fly(config, [make_inputs(1)], make_state({"mode": BENCH}))
    state, (out,) = fly(config, [make_inputs(2, {**turned, "command": MRD_COMMAND_RESUME})], state)
    assert (out["mode"], out["ticks"], out["trace"]["gate"]["trusted"]) == (HOLD_OFF, (0, 0, 0), 0)
    assert out["status"] == 1 << MRD_S_FIELD_IMPLAUSIBLE and state["path"]["field_valid"] == 0
    assert out["trace"]["law"]["active"] == out["trace"]["derivative"]["valid"] == 0


@pytest.mark.parametrize("mode", MODES)
def test_pulses_of_the_law_leave_in_damping_only(mode):
    config = make_config({"supervisor.settle_dwell": 100})
    state, outputs = fly(config, [make_inputs(1)], make_state({"mode": mode}))
    begun = outputs[0]["mode"]
    turned = make_inputs(2, {"path.mag_raw": (10_100, -5_000, 2_000), "separation_s": 599})
    _, (out,) = fly(config, [turned], state)
    assert out["trace"]["pulses"]["ticks"] == (-15, 0, 0)  # 100·5000 / 32768 = 15.3
    assert out["ticks"] == ((-15, 0, 0) if begun == DAMPING else (0, 0, 0))


# ---- dwell ----

def walk(mode, rates, dwell=0, low_power=0, **supervisor):
    """Mode and dwell after each rate: a valid one, None for none, or (rate,) for one that fell back."""
    passed = []
    for rate in rates:
        fell_back, valid = isinstance(rate, tuple), rate is not None
        value = rate[0] if fell_back else rate or 0
        inputs = make_inputs(changes={"low_power": low_power})
        mode, dwell, _ = advance(Standing(mode, dwell, 0), 0, {**SUPERVISOR, **supervisor}, inputs,
            Seen(value, valid, fell_back, diverging=0))
        passed.append((mode, dwell))
    return passed


def test_settling_counts_slow_cycles():
    assert walk(DAMPING, (100, 0, 100)) == [(DAMPING, 1), (DAMPING, 2), (SETTLED, 0)]
    assert walk(DAMPING, (100, 100, 101, 100)) == [(DAMPING, 1), (DAMPING, 2), (DAMPING, 0), (DAMPING, 1)]
    assert walk(DAMPING, (100, None, 100, None, 100)) == [
        (DAMPING, 1), (DAMPING, 1), (DAMPING, 2), (DAMPING, 2), (SETTLED, 0)]


def test_waking_counts_fast_cycles():
    assert walk(SETTLED, (201, 201)) == [(SETTLED, 1), (DAMPING, 0)]
    assert walk(SETTLED, (201, 200, 201)) == [(SETTLED, 1), (SETTLED, 0), (SETTLED, 1)]
    assert walk(SETTLED, (201, None, 65535)) == [(SETTLED, 1), (SETTLED, 1), (DAMPING, 0)]


def test_waking_waits_for_the_end_of_low_power():
    assert walk(SETTLED, (201, 201, 201), low_power=1) == [(SETTLED, 1), (SETTLED, 2), (SETTLED, 3)]
    assert walk(SETTLED, (200, None), dwell=7, low_power=1) == [(SETTLED, 0), (SETTLED, 0)]
    assert walk(SETTLED, (None, 201), dwell=7) == [(SETTLED, 7), (DAMPING, 0)]
    assert walk(SETTLED, (201,), dwell=2**32 - 1, low_power=1) == [(SETTLED, 2**32 - 1)]


def test_hold_off_ends_with_two_cycles_in_a_row_beyond_the_separation_time():
    seconds = (600, 599, 600, 600)
    sequence = [make_inputs(i, {"separation_s": s}) for i, s in enumerate(seconds)]
    states, state = [], make_state({"mode": HOLD_OFF})
    for inputs in sequence:
        state, _ = fly(make_config(), [inputs], state)
        states.append((state["mode"], state["dwell"]))
    assert states == [(HOLD_OFF, 1), (HOLD_OFF, 0), (HOLD_OFF, 1), (DAMPING, 0)]


def test_a_pause_lasts_its_cycles_whatever_the_power():
    sequence = [make_inputs(i, {"low_power": 1, "separation_s": 0}) for i in range(4)]
    _, outputs = fly(make_config(), sequence, make_state({"mode": PAUSE, "trips": 1}))
    assert [out["mode"] for out in outputs] == [PAUSE, PAUSE, HOLD_OFF, INHIBIT]
    assert [out["status"] >> MRD_S_DIVERGING & 1 for out in outputs] == [1, 1, 0, 0]


@pytest.mark.parametrize("mode", [SAFE, INHIBIT, BENCH, PAUSE, HOLD_OFF, DAMPING, SETTLED])
def test_resume_gives_back_retries_and_coils(mode):
    ballots = {f"path.{name}[{i}]": {"level": 30 + i, "tripped": i & 1} for name in ("weak", "backward")
               for i in range(3)}
    before = make_state({"mode": mode, "trips": 2, **{f"{name}.{key}": value for name, ballot in ballots.items()
                                                      for key, value in ballot.items()}})
    state, _ = fly(make_config(), [make_inputs(changes={"command": MRD_COMMAND_RESUME})], before)
    clear = ({"level": 0, "tripped": 0},) * 3
    path = state["path"]
    if mode in (SAFE, INHIBIT, BENCH, PAUSE):
        assert (state["trips"], path["weak"], path["backward"]) == (0, clear, clear)
    else:
        assert (state["trips"], path["weak"]) == (2, before["path"]["weak"])
        assert path["backward"] == before["path"]["backward"]


def test_an_estimate_that_fell_back_ends_a_dwell_but_does_not_lengthen_it():
    assert walk(DAMPING, (100, 100, (0,), 100)) == [(DAMPING, 1), (DAMPING, 2), (DAMPING, 2), (SETTLED, 0)]
    assert walk(DAMPING, (100, (100,), (101,))) == [(DAMPING, 1), (DAMPING, 1), (DAMPING, 0)]
    assert walk(DAMPING, ((0,),), settle_dwell=1) == [(DAMPING, 0)]
    assert walk(SETTLED, ((201,), (201,))) == [(SETTLED, 1), (DAMPING, 0)]
    assert walk(SETTLED, (201, (200,), 201)) == [(SETTLED, 1), (SETTLED, 0), (SETTLED, 1)]


@pytest.mark.parametrize(("settle_by", "gyro_valid", "mode"), [
    (MRD_SETTLE_BY_GYRO, 1, SETTLED), (MRD_SETTLE_BY_GYRO, 0, DAMPING), (MRD_SETTLE_BY_FIELD, 0, SETTLED),
])
def test_settling_by_the_gyro_waits_for_the_gyro(settle_by, gyro_valid, mode):
    config = make_config({"supervisor.settle_by": settle_by, "supervisor.settle_dwell": 1})
    state, _ = fly(config, [make_inputs(1)], make_state({"mode": HOLD_OFF}))
    state, _ = fly(config, [make_inputs(2, {"path.gyro_valid": 0})], state)
    _, (out,) = fly(config, [make_inputs(3, {"path.gyro_valid": gyro_valid})], state)
    assert (out["mode"], out["rate"], out["rate_valid"]) == (mode, 0, 1)
    assert out["status"] >> MRD_S_ESTIMATE_FELL_BACK & 1 == (mode == DAMPING)


def test_dwells_of_one_cycle_and_of_the_whole_counter():
    assert walk(DAMPING, (0,), settle_dwell=1) == [(SETTLED, 0)]
    assert walk(SETTLED, (65535,), wake_dwell=1) == [(DAMPING, 0)]
    assert walk(DAMPING, (0,), dwell=2**32 - 2, settle_dwell=2**32 - 1) == [(SETTLED, 0)]
    assert walk(DAMPING, (0,), dwell=2**32 - 1, settle_dwell=2**32 - 1) == [(SETTLED, 0)]


def test_a_change_of_mode_forgets_the_dwell():
    state, _ = one({"dwell": 2}, {"low_power": 1})
    assert (state["mode"], state["dwell"]) == (INHIBIT, 0)
    state, _ = one({"dwell": 2}, {"path.mag_valid": 0})
    assert (state["mode"], state["dwell"]) == (DAMPING, 2)


def test_one_transition_a_step():
    """HOLD_OFF that turns to DAMPING does not count towards the dwell yet."""
    sequence = [make_inputs(0), make_inputs(1, {"command": MRD_COMMAND_RESUME}), make_inputs(2), make_inputs(3)]
    state, outputs = fly(make_config({"supervisor.settle_dwell": 1}), sequence, make_state({"mode": SAFE}))
    assert [out["mode"] for out in outputs] == [SAFE, HOLD_OFF, DAMPING, SETTLED]
    assert [out["rate_valid"] for out in outputs] == [0, 1, 1, 1] and state["dwell"] == 0


def test_modes_differ_in_two_bits():
    assert all((a ^ b).bit_count() >= 2 for a in MODES for b in MODES if a != b)
