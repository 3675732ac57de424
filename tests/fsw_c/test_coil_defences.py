"""Coils whose current is not what was commanded, and pulses in flight while the clock is set: on the C, cycle by cycle.

The first pulse is that of cycle 1, so its current is read in cycle 2, and the sixteenth in a row in cycle 17.
"""

from __future__ import annotations

import numpy as np
import pytest
from fsw_c.runs import Bank
from fsw_c.sequences import PERIOD, SENSE, config_of, cycle, driven, end_of_pulses, has, modes, stamped, trusted

from pyharness.exact import constants as mrd

OK, WEAK, BACKWARD, ON = mrd.MRD_COIL_OK, mrd.MRD_COIL_WEAK, mrd.MRD_COIL_BACKWARD, mrd.MRD_COIL_ON
OFF_MAX, FULL = 100, 1800


@pytest.fixture(scope="module")
def sensed() -> dict:
    config = config_of(current_sense=SENSE)
    assert config["path"]["current_off_max"] == OFF_MAX and config["path"]["current_min"] == (847, 847, 847)
    return config


@pytest.fixture(scope="module")
def sense_of_pulses(library, sensed) -> np.ndarray:
    """The sign of the pulses that every cycle of the sequence asks for; all three coils are driven for long enough."""
    ticks = Bank(library, sensed).run([stamped(0), stamped(1)])["ticks"][1]
    assert (np.abs(ticks) >= sensed["path"]["current_ticks"]).all()
    return np.sign(ticks)


def currents(sense: np.ndarray, coil: int, current: int) -> tuple[int, ...]:
    """Readings at the end of a pulse: full on all coils, but `current` along the command on one."""
    along = np.full(3, FULL)
    along[coil] = current
    return tuple((sense * along).tolist())


@pytest.mark.parametrize("coil", range(3))
@pytest.mark.parametrize("sign", [1, -1])
def test_a_coil_that_is_on_in_the_sample_rejects_it_at_once(library, sensed, sense_of_pulses, coil, sign):
    for current, on in ((OFF_MAX, False), (OFF_MAX + 1, True)):
        held = tuple(sign * current if i == coil else 0 for i in range(3))
        healthy = currents(sense_of_pulses, 0, FULL)
        sequence = [stamped(n, current_driven=healthy, current_sampled=held if n == 5 else (0, 0, 0)) for n in range(8)]
        outputs = Bank(library, sensed).run(sequence)
        assert [n for n, told in enumerate(has(outputs, "COIL_CURRENT")) if told] == ([5] if on else [])
        assert trusted(outputs) == [0, 1, 1, 1, 1, 1 - on, 1, 1] == [int(d) for d in driven(outputs)]
        assert outputs["trace"]["currents"]["fault"][5, coil] == (ON if on else OK)
        assert outputs["counters"]["coil_faults"][-1] == int(on)


@pytest.mark.parametrize("coil", range(3))
@pytest.mark.parametrize("current", [0, 846, -OFF_MAX], ids=["open", "weak", "hardly backward"])
def test_a_weak_coil_is_told_of_and_goes_on(library, sensed, sense_of_pulses, coil, current):
    sequence = [stamped(n, current_driven=currents(sense_of_pulses, coil, current)) for n in range(30)]
    outputs = Bank(library, sensed).run(sequence)
    assert outputs["trace"]["currents"]["fault"][:, coil].tolist() == [OK] * 17 + [WEAK] * 13
    assert has(outputs, "COIL_CURRENT") == [False] * 17 + [True] * 13
    assert (outputs["ticks"][1:] != 0).all() and trusted(outputs) == [0] + [1] * 29


@pytest.mark.parametrize("coil", range(3))
def test_a_coil_at_its_least_current_is_healthy(library, sensed, sense_of_pulses, coil):
    sequence = [stamped(n, current_driven=currents(sense_of_pulses, coil, 847)) for n in range(40)]
    assert not any(has(Bank(library, sensed).run(sequence), "COIL_CURRENT"))


@pytest.mark.parametrize("coil", range(3))
def test_a_backward_coil_and_no_other_is_out_of_use_until_resume(library, sensed, sense_of_pulses, coil):
    """Low power, and what follows by itself, does not give it back."""
    backward, healthy = (currents(sense_of_pulses, coil, c) for c in (-OFF_MAX - 1, FULL))
    sequence = [stamped(n, current_driven=backward) for n in range(20)]
    sequence += [stamped(n, current_driven=healthy, low_power=int(n == 20)) for n in range(20, 25)]
    sequence += [stamped(25, command=mrd.MRD_COMMAND_INHIBIT), stamped(26, command=mrd.MRD_COMMAND_RESUME)]
    sequence += [stamped(n, current_driven=healthy) for n in range(27, 30)]
    outputs = Bank(library, sensed).run(sequence)
    pulses = outputs["ticks"] != 0
    others = [i for i in range(3) if i != coil]
    assert np.flatnonzero(pulses[:, coil]).tolist() == [*range(1, 17), 27, 28, 29]
    for other in others:
        assert np.flatnonzero(pulses[:, other]).tolist() == [*range(1, 20), 22, 23, 24, 27, 28, 29]
    fault = outputs["trace"]["currents"]["fault"]
    assert fault[:, coil].tolist() == [OK] * 17 + [BACKWARD] * 9 + [OK] * 4 and not fault[:, others].any()
    assert (outputs["trace"]["pulses"]["ticks"][17:, coil] != 0).all()  # what the law asks for is shown


def test_without_a_reading_nothing_is_said_of_a_coil(library, sensed, sense_of_pulses):
    wrong = {"current_driven": currents(sense_of_pulses, 0, -FULL), "current_sampled": (FULL,) * 3, "current_valid": 0}
    outputs = Bank(library, sensed).run([stamped(n, **wrong) for n in range(30)])
    assert not any(has(outputs, "COIL_CURRENT")) and all(driven(outputs)[1:])


# ---- a pulse that is not stamped yet when the clock is set ----


def set_by(us: int, n: int, stamps: tuple[int, ...], **changes) -> dict:
    """Cycle n on a clock that was set forward by `us` (back, if negative), with stamps of either clock."""
    inputs = cycle(n, stamps, **changes)
    for name in ("cycle_start_us", "sample_us"):
        inputs["path"][name] = (inputs["path"][name] + us) % 2**32
    inputs["path"]["switch_off_us"] = tuple(stamp % 2**32 for stamp in stamps)
    return inputs


def on_new_clock(us: int, n: int) -> tuple[int, ...]:
    return tuple(stamp + us for stamp in end_of_pulses(n))


SET_S = [-1, -37, -1000, -2000, -2200, -3000, -4000, 1, 37, 1000, 2000, 2200, 3000, 4000]


@pytest.mark.parametrize("seconds", SET_S)
def test_a_pulse_before_the_clock_was_set_is_stamped_by_the_new_clock(library, seconds):
    """The cycle of the change at once: the rate law needs no derivative."""
    us = seconds * 1_000_000
    sequence = [stamped(n) for n in range(5)] + [set_by(us, n, on_new_clock(us, n - 1)) for n in range(5, 8)]
    outputs = Bank(library, config_of()).run(sequence)
    assert trusted(outputs) == [0] + [1] * 7 == [int(d) for d in driven(outputs)]


@pytest.mark.parametrize("seconds", SET_S)
def test_without_a_fresh_stamp_it_stays_pending_whatever_the_clock(library, seconds):
    us = seconds * 1_000_000
    old = end_of_pulses(3)  # what was handed in before the pulse of cycle 4
    sequence = [stamped(n) for n in range(5)] + [set_by(us, n, old) for n in range(5, 9)]
    outputs = Bank(library, config_of()).run(sequence)
    assert has(outputs, "SWITCH_OFF_UNSTAMPED")[5:] == [True] * 4 and not any(driven(outputs)[5:])
    again = [*sequence, set_by(us, 9, on_new_clock(us, 8))]
    assert trusted(Bank(library, config_of()).run(again))[9] == 1


@pytest.mark.parametrize("seconds", [-1, -3, -37])
def test_a_stamp_of_the_old_clock_lies_ahead_until_the_new_one_has_passed_it(library, seconds):
    """No pulse until then, whatever is stamped in between; nothing is pending."""
    us, n = seconds * 1_000_000, 5
    late = -us // PERIOD + 5
    sequence = [stamped(k) for k in range(n)] + [set_by(us, k, end_of_pulses(n - 1)) for k in range(n, n + late)]
    outputs = Bank(library, config_of()).run(sequence)
    # The pulse of cycle 4 ended 70 ms before the sample of what cycle 5 was, by the old clock: that is so late after the change.
    assert driven(outputs)[n:] == [False] * (-us // PERIOD) + [True] + [False] * 4
    assert not any(has(outputs, "SWITCH_OFF_UNSTAMPED")[: n - us // PERIOD]) and set(modes(outputs)[1:]) == {mrd.MRD_MODE_DAMPING}
