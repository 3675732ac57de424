"""Hold-off, low power, divergence, pause, retries and commands: on the C, cycle by cycle."""

from __future__ import annotations

import numpy as np
import pytest
from fsw_c.runs import Bank
from fsw_c.sequences import KEY, config_of, cycle, driven, has, modes, stamped, turning

from pyharness import exact
from pyharness.exact import constants as mrd
from pyharness.flight.records import to_dict

HOLD_OFF, DAMPING, SETTLED, PAUSE = mrd.MRD_MODE_HOLD_OFF, mrd.MRD_MODE_DAMPING, mrd.MRD_MODE_SETTLED, mrd.MRD_MODE_PAUSE
SAFE, INHIBIT = mrd.MRD_MODE_SAFE, mrd.MRD_MODE_INHIBIT
COMMANDS = {name: value for name, value in vars(mrd).items() if name.startswith("MRD_COMMAND_")}
MODES = {name: value for name, value in vars(mrd).items() if name.startswith("MRD_MODE_")}
SLOW, FAST = (84, -48, 36), (2000, -1000, 500)


# ---- hold-off and low power ----


@pytest.mark.parametrize("bit", range(5, 32))
def test_a_flipped_separation_time_does_not_end_hold_off(library, bit):
    """Of 29 s, hold-off 30 s; two cycles of it in a row do."""
    for flipped, ends in (([3], None), ([3, 5, 7], None), ([3, 4], 4)):
        sequence = [stamped(n, separation_s=29 ^ (1 << bit if n in flipped else 0)) for n in range(10)]
        want = [HOLD_OFF] * 10 if ends is None else [HOLD_OFF] * ends + [DAMPING] * (10 - ends)
        outputs = Bank(library, config_of()).run(sequence)
        assert modes(outputs) == want and any(driven(outputs)) == (ends is not None)


@pytest.mark.parametrize("law", ["rate", "derivative"])
def test_low_power_for_a_cycle_costs_two(library, law):
    """Its own, and one of hold-off; a derivative is there all the time."""
    sequence = [stamped(n, mag_raw=(2000 + 20 * n, -1500, 1000), low_power=int(n == 6)) for n in range(12)]
    outputs = Bank(library, config_of(law)).run(sequence)
    first = 1 if law == "rate" else 2
    assert [n for n, on in enumerate(driven(outputs)) if not on] == [*range(first), 6, 7]
    assert modes(outputs)[5:9] == [DAMPING, INHIBIT, HOLD_OFF, DAMPING]


def test_settled_is_not_left_for_low_power_and_wakes_after_it(library):
    config = config_of(supervisor={"settle_dwell": 3, "wake_dwell": 2})
    sequence = [stamped(n, gyro_raw=SLOW if n < 8 else FAST, low_power=int(5 <= n < 14)) for n in range(16)]
    outputs = Bank(library, config).run(sequence)
    assert modes(outputs) == [HOLD_OFF] + [DAMPING] * 3 + [SETTLED] * 10 + [DAMPING] * 2
    assert outputs["handover"].tolist() == [0] * 4 + [1] * 10 + [0] * 2


# ---- divergence: windows of eight cycles, a pause of five ----


def supervisor(**changes) -> dict:
    return {"window_cycles": 8, "pause_cycles": 5, "growth": 257, "guard_turn": 100, "stall_turn": 100, "retries": 1, "settle_dwell": 1000, **changes}


def growing(cycles: int) -> list[dict]:
    """Five per cent faster with every cycle, from 1° a cycle."""
    return turning([1.05**n for n in range(cycles)])


def test_a_tumble_that_grows_pauses_tries_again_and_ends_in_safe(library):
    """Damping begins with cycle 1, its windows with cycle 2: they end with 9 and 17; after pause and hold-off with 32 and 40."""
    outputs = Bank(library, config_of("derivative", supervisor=supervisor())).run(growing(44))
    assert modes(outputs) == [HOLD_OFF] + [DAMPING] * 16 + [PAUSE] * 5 + [HOLD_OFF] * 2 + [DAMPING] * 16 + [SAFE] * 4
    assert [n for n, told in enumerate(has(outputs, "DIVERGING")) if told] == [*range(17, 22), 40]
    assert [n for n, on in enumerate(driven(outputs)) if on] == [*range(2, 17), *range(24, 40)]
    trips = outputs["counters"]["trips"]
    assert (np.flatnonzero(np.diff(trips, prepend=0)).tolist(), int(trips[-1])) == ([17, 40], 2)


@pytest.mark.parametrize(("fast", "diverges"), [(range(10, 13), False), (range(10, 14), True), (range(14, 18), True), (range(12, 16), False)])
def test_four_turns_count_by_their_least(library, fast, diverges):
    """The second window's fours are cycles 10 to 13 and 14 to 17: less than a whole one is no peak."""
    outputs = Bank(library, config_of("derivative", supervisor=supervisor(growth=300))).run(turning([8.0 if n in fast else 3.0 for n in range(18)]))
    assert has(outputs, "DIVERGING") == [False] * 17 + [diverges]


@pytest.mark.parametrize("retries", [0, 1, 3])
def test_there_are_as_many_pauses_as_retries(library, retries):
    config = config_of("derivative", supervisor=supervisor(retries=retries))
    outputs = Bank(library, config).run(turning([1.02**n for n in range(100)]))
    entered = [b for a, b in zip(modes(outputs), modes(outputs)[1:], strict=False) if a != b]
    assert entered.count(PAUSE) == retries and entered[-1] == SAFE


def test_resume_gives_the_retries_back(library):
    sequence = growing(60)
    sequence[41]["command"] = mrd.MRD_COMMAND_RESUME
    outputs = Bank(library, config_of("derivative", supervisor=supervisor())).run(sequence)
    assert modes(outputs)[40:] == [SAFE, HOLD_OFF] + [DAMPING] * 16 + [PAUSE] * 2


@pytest.mark.parametrize(("turn", "told"), [(lambda n: 3.0, True), (lambda n: 3.0 * 0.97**n, False)], ids=["no progress", "damped"])
def test_a_tumble_that_only_lasts_is_told_of_and_damped_on(library, turn, told):
    """Against the peak two windows before: from the end of the third window, cycle 25, on."""
    outputs = Bank(library, config_of("derivative", supervisor=supervisor())).run(turning([turn(n) for n in range(40)]))
    assert [n for n, flag in enumerate(has(outputs, "NO_PROGRESS")) if flag] == (list(range(25, 40)) if told else [])
    assert modes(outputs) == [HOLD_OFF] + [DAMPING] * 39 and not any(has(outputs, "DIVERGING"))
    assert all(driven(outputs)[2:])


def test_without_the_guard_growth_is_told_of_as_no_progress(library):
    outputs = Bank(library, config_of("derivative", supervisor=supervisor(guard_turn=65535))).run(growing(44))
    assert not any(has(outputs, "DIVERGING")) and any(has(outputs, "NO_PROGRESS"))
    assert set(modes(outputs)[1:]) == {DAMPING}


def test_a_pause_survives_a_restart_and_begins_anew(library):
    bank = Bank(library, config_of("derivative", supervisor=supervisor()))
    sequence = growing(30)
    assert modes(bank.run(sequence[:20]))[-1] == PAUSE
    bank.state["counters"]["trusted"] ^= 1
    outputs = bank.run(sequence[20:])
    assert has(outputs, "STATE_RESTARTED") == [True] + [False] * 9
    assert modes(outputs) == [PAUSE] * 4 + [HOLD_OFF] * 2 + [DAMPING] * 4
    assert has(outputs, "DIVERGING") == [True] * 4 + [False] * 6 and not any(driven(outputs)[:6])


@pytest.mark.parametrize(("command", "mode"), [("RESUME", HOLD_OFF), ("INHIBIT", INHIBIT), ("SAFE", SAFE)])
def test_a_pause_is_left_by_command(library, command, mode):
    sequence = growing(20)
    sequence[19]["command"] = COMMANDS[f"MRD_COMMAND_{command}"]
    outputs = Bank(library, config_of("derivative", supervisor=supervisor())).run(sequence)
    assert modes(outputs)[17:] == [PAUSE, PAUSE, mode] and not has(outputs, "DIVERGING")[19]


# ---- commands ----


def test_no_flipped_bit_of_a_command_makes_another():
    assert len(COMMANDS) == 6
    for value in COMMANDS.values():
        assert not {value ^ 1 << bit for bit in range(16)} & set(COMMANDS.values())


@pytest.mark.parametrize("mode", MODES.values(), ids=[name.removeprefix("MRD_MODE_").lower() for name in MODES])
def test_a_command_with_a_flipped_bit_is_refused_and_does_nothing(library, mode):
    """6 × 16 flips in each mode, with the arguments that the command itself would need."""
    bank = Bank(library, config_of())
    bank.run([stamped(n) for n in range(4)])
    bank.state["mode"] = mode
    bank.state["digest"] = exact.state_digest(to_dict(bank.state[0]))
    before = bank.state.copy()
    arguments = {"command_key": KEY, "command_coil": 1, "command_ticks": 100}
    plain = bank.run([cycle(4, **arguments)])[0]
    after = bank.state.copy()
    for value in COMMANDS.values():
        for bit in range(16):
            bank.state[...] = before
            outputs = bank.run([cycle(4, command=value ^ 1 << bit, **arguments)])
            assert has(outputs, "COMMAND_REFUSED") == [True]
            outputs["status"] ^= 1 << mrd.MRD_S_COMMAND_REFUSED
            for counters in (outputs["counters"], bank.state["counters"]):
                counters["refused"] -= 1
            assert outputs[0] == plain
            bank.state["digest"] = exact.state_digest(to_dict(bank.state[0]))
            assert bank.state == after
