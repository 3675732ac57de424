"""Ballots, and stage 3 with what follows from it: limits of the coil currents from both sides."""

import pytest
from exact.samples import fly, make_config, make_inputs, make_state, path_config, path_inputs, path_state

from pyharness.exact import path_restore, path_sense, path_withhold
from pyharness.exact.ballot import clear_ballot, vote
from pyharness.exact.constants import (
    MRD_COIL_BACKWARD,
    MRD_COIL_OK,
    MRD_COIL_ON,
    MRD_COIL_WEAK,
    MRD_COMMAND_BENCH,
    MRD_MODE_BENCH,
    MRD_MODE_DAMPING,
    MRD_S_BLANKED,
    MRD_S_COIL_CURRENT,
    MRD_S_NO_PREVIOUS,
    MRD_S_SWITCH_OFF_UNSTAMPED,
)

FITTED = path_config(current_fitted=1)  # 100 ticks; at least 400, 500, 600; off within 10
TRIPPED = {"level": 20, "tripped": 1}
OPEN = {"level": 20, "tripped": 0}


def polled(votes, ballot=None):
    """A ballot after each of these votes."""
    ballot, passed = ballot or clear_ballot(), []
    for against in votes:
        ballot = vote(ballot, against)
        passed.append((ballot["level"], ballot["tripped"]))
    return passed


def test_sixteen_votes_in_a_row_trip_and_sixty_four_clear():
    against = polled([True] * 18)
    assert against[14:] == [(60, 0), (64, 1), (64, 1), (64, 1)]
    cleared = polled([False] * 65, {"level": 64, "tripped": 1})
    assert cleared[0] == (63, 1) and cleared[62:] == [(1, 1), (0, 0), (0, 0)]


@pytest.mark.parametrize(("others", "trips"), [(4, False), (3, True)])
def test_a_lasting_share_above_one_in_five_trips(others, trips):
    assert any(tripped for _, tripped in polled(([True] + [False] * others) * 100)) == trips


def test_between_full_and_empty_a_ballot_stays_as_it_was():
    assert polled([True, False], OPEN) == [(24, 0), (23, 0)]
    assert polled([True, False], TRIPPED) == [(24, 1), (23, 1)]
    assert polled([True], {"level": 61, "tripped": 0}) == [(64, 1)]


def sense(state=None, config=FITTED, **inputs):
    return path_sense(path_state(**state or {}), config, path_inputs(**inputs), 0)


@pytest.mark.parametrize("coil", range(3))
@pytest.mark.parametrize(("pulse", "margin", "backward", "weak"), [
    (100, 0, 7, 7), (100, -1, 7, 12), (-100, 0, 7, 7), (-100, 1, 7, 12), (5000, 0, 7, 7),
    (99, -1, 8, 8), (-99, 1, 8, 8), (0, -1, 8, 8),
])
def test_less_than_the_least_current_is_a_vote_for_weak(coil, pulse, margin, backward, weak):
    least = FITTED["current_min"][coil]
    driven = (least if pulse >= 0 else -least) + margin
    ballots = ({"level": 8, "tripped": 0},) * 3
    after, trace, _ = sense(
        {"ticks": tuple(pulse if i == coil else 0 for i in range(3)), "weak": ballots, "backward": ballots},
        current_driven=tuple(driven if i == coil else 0 for i in range(3)))
    for i in range(3):
        levels = after["backward"][i]["level"], after["weak"][i]["level"]
        assert levels == ((backward, weak) if i == coil else (8, 8))
    assert trace["currents"]["fault"] == (MRD_COIL_OK,) * 3


@pytest.mark.parametrize(("pulse", "driven", "backward", "weak"), [
    (100, -10, 7, 12), (100, -11, 12, 7), (-100, 10, 7, 12), (-100, 11, 12, 7), (100, 0, 7, 12),
    (100, -32768, 12, 7), (-100, -32768, 7, 7), (-16384, 32767, 12, 7), (99, -32768, 8, 8),
])
def test_current_against_the_pulse_is_a_vote_for_backward(pulse, driven, backward, weak):
    ballots = ({"level": 8, "tripped": 0},) * 3
    after, _, _ = sense({"ticks": (pulse, 0, 0), "weak": ballots, "backward": ballots}, current_driven=(driven, 0, 0))
    assert (after["backward"][0]["level"], after["weak"][0]["level"]) == (backward, weak)


@pytest.mark.parametrize(("sampled", "on"), [(10, 0), (11, 1), (-10, 0), (-11, 1), (-32768, 1), (32767, 1), (0, 0)])
@pytest.mark.parametrize("coil", range(3))
def test_a_coil_with_current_during_the_sample_is_on_and_blanks_it(sampled, on, coil):
    after, trace, status = sense(current_sampled=tuple(sampled if i == coil else 0 for i in range(3)))
    assert trace["currents"]["fault"] == tuple(MRD_COIL_ON if on and i == coil else MRD_COIL_OK for i in range(3))
    assert trace["gate"]["trusted"] == (not on)
    assert after["off_clear"] == tuple(0 if on and i == coil else 1 for i in range(3))
    assert status == (1 << MRD_S_BLANKED | 1 << MRD_S_COIL_CURRENT if on else 1 << MRD_S_NO_PREVIOUS)


def test_a_coil_that_is_on_loses_its_old_switch_off():
    known = {"switch_off_us": path_inputs()["switch_off_us"], "off_clear": (1, 1, 1)}
    after, _, _ = sense(known, current_sampled=(0, 11, 0))
    assert after["off_clear"] == (1, 0, 1)


def test_a_pending_coil_that_is_on_is_unstamped_all_the_same():
    after, _, status = sense(
        {"pending": (1, 0, 0), "drive_us": (1_095_000, 0, 0)}, current_sampled=(11, 0, 0))
    assert status == 1 << MRD_S_COIL_CURRENT | 1 << MRD_S_SWITCH_OFF_UNSTAMPED | 1 << MRD_S_BLANKED
    assert after["pending"] == (1, 0, 0)


@pytest.mark.parametrize(("sampled", "backward", "weak", "fault"), [
    (11, TRIPPED, TRIPPED, MRD_COIL_ON), (0, TRIPPED, TRIPPED, MRD_COIL_BACKWARD),
    (0, TRIPPED, OPEN, MRD_COIL_BACKWARD), (0, OPEN, TRIPPED, MRD_COIL_WEAK), (0, OPEN, OPEN, MRD_COIL_OK),
])
def test_the_worst_fault_of_a_coil_is_told(sampled, backward, weak, fault):
    state = {"backward": (OPEN, backward, OPEN), "weak": (OPEN, weak, OPEN)}
    _, trace, status = sense(state, current_sampled=(0, sampled, 0))
    assert trace["currents"]["fault"] == (0, fault, 0)
    assert status >> MRD_S_COIL_CURRENT & 1 == (fault != MRD_COIL_OK)


def test_without_a_reading_nothing_is_voted_but_what_tripped_stays():
    state = {"ticks": (100, 100, 100), "backward": (TRIPPED, OPEN, OPEN), "weak": (OPEN, TRIPPED, OPEN)}
    after, trace, status = sense(state, current_valid=0, current_sampled=(99, 99, 99))
    assert (after["backward"], after["weak"]) == (state["backward"], state["weak"])
    assert trace["currents"]["fault"] == (MRD_COIL_BACKWARD, MRD_COIL_WEAK, MRD_COIL_OK)
    assert trace["gate"]["trusted"] == 1 and status >> MRD_S_COIL_CURRENT & 1


def test_where_no_sense_is_fitted_nothing_is_looked_at():
    state = {"ticks": (100, 100, 100), "backward": (TRIPPED,) * 3}
    after, trace, status = sense(state, path_config(), current_sampled=(99, 99, 99))
    assert after["backward"] == (TRIPPED,) * 3 and trace["currents"]["fault"] == (0, 0, 0)
    assert status == 1 << MRD_S_NO_PREVIOUS


def test_a_backward_coil_is_withheld_until_it_is_restored():
    state = path_state(backward=(OPEN, TRIPPED, OPEN), weak=(TRIPPED,) * 3)
    assert path_withhold(state, (5, -6, 7)) == (5, 0, 7)
    restored = path_restore(state)
    assert restored == path_state() and path_withhold(restored, (5, -6, 7)) == (5, -6, 7)


@pytest.mark.parametrize(("mode", "ticks"), [(MRD_MODE_DAMPING, (0, 15, 0)), (MRD_MODE_BENCH, (-7, 0, 0))])
def test_a_backward_coil_gets_no_pulse_of_the_law_but_one_of_the_bench(mode, ticks):
    """The field turns by (100, -100, 0): pulses of (-15, 15, 0) ticks, that of x withheld."""
    config = make_config({"path.current_fitted": 1})
    sequence = [make_inputs(1), make_inputs(2, {"path.mag_raw": (10_100, -5_100, 2_000), "command_ticks": -7,
        "command": MRD_COMMAND_BENCH if mode == MRD_MODE_BENCH else 0})]
    tripped = {"path.backward[0].tripped": 1, "path.backward[0].level": 9}
    state, outputs = fly(config, sequence, make_state({"mode": mode, **tripped}))
    assert outputs[1]["trace"]["pulses"]["ticks"] == (-15, 15, 0)
    assert outputs[1]["ticks"] == state["path"]["ticks"] == ticks
    assert state["path"]["pending"] == tuple(int(n != 0) for n in ticks)


PERIOD = path_config()["period_us"]


@pytest.mark.parametrize(("elapsed", "stamped", "moved"), [
    (0, False, False), (10_000, True, False), (9_999, False, False),  # the stamp is 10 ms old
    (2**30, True, False), (2**31 + 9_999, True, False), (2**31 + 10_000, True, True),
    (2**32 - PERIOD - 1, True, True), (2**32 - PERIOD, False, False), (2**32 - 1, False, False),
])
def test_a_pulse_of_long_ago_or_from_before_the_clock_was_set_back_takes_a_present_stamp(elapsed, stamped, moved):
    """A stamp is judged as it stands first; one that lies ahead by less than a period is of a pulse still to come."""
    start = path_inputs()["cycle_start_us"]
    opened = (start - elapsed) % 2**32
    after, _, status = sense({"pending": (1, 0, 0), "drive_us": (opened, 0, 0)},
        switch_off_us=((start - 10_000) % 2**32,) * 3)
    assert after["pending"] == (int(not stamped), 0, 0)
    assert status >> MRD_S_SWITCH_OFF_UNSTAMPED & 1 == (not stamped)
    assert after["drive_us"][0] == ((start - 2**30) % 2**32 if moved else opened)
