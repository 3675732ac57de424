"""The clock of a log: wrapped differences, elapsed time, and what is odd."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from pyharness.replay.clock import elapsed_s, remarks, steps_us

PERIOD = 500_000


@given(st.integers(0, 2**32 - 1), st.lists(st.integers(-(2**31), 2**31 - 1), max_size=20))
def test_steps_are_found_again_through_the_wrap(start, steps):
    stamps = np.array([(start + sum(steps[:i])) % 2**32 for i in range(len(steps) + 1)], np.uint32)
    assert steps_us(stamps).tolist() == steps
    elapsed = elapsed_s(stamps, PERIOD)
    assert (np.diff(elapsed) >= 0).all()
    np.testing.assert_allclose(elapsed[-1], sum(PERIOD if s < 0 else s for s in steps) * 1e-6, atol=1e-9)


def test_time_stands_still_in_a_repeated_cycle_and_goes_on_where_the_clock_goes_back():
    assert elapsed_s(np.array([7, 7, 3, 10], np.uint32), PERIOD).tolist() == [0.0, 0.0, 0.5, 0.500007]


def told(*steps: int) -> list[tuple[int, str]]:
    return remarks((np.cumsum([2**32 - 1_000_000, *steps]) % 2**32).astype(np.uint32), PERIOD)


def test_cycles_on_time_are_not_told():
    assert told(PERIOD, PERIOD // 2, PERIOD * 3 // 2, PERIOD) == []


def test_what_is_odd_is_told_by_row():
    assert told(PERIOD, 4 * PERIOD, 750_001, 0, 249_999, -3) == [
        (2, "3 cycles missing: begins 2000000 µs after the row before, the period is 500000 µs"),
        (3, "1 cycle missing: begins 750001 µs after the row before, the period is 500000 µs"),
        (4, "begins with the row before: a repeated cycle"),
        (5, "begins 249999 µs after the row before: less than half a period of 500000 µs"),
        (6, "the clock goes back by 3 µs"),
    ]
