"""The arithmetic header against published fixed-point operators; where it rounds otherwise, the difference is the test.

Q15 multiply with rounding, saturate((a b + 2^14) >> 15): WebAssembly `i16x8.q15mulr_sat_s` (from memory). It rounds half up;
the controller rounds half away from zero, which differs for negative ties only, and makes the law odd.
"""

from __future__ import annotations

import random

from pyharness.exact.num import clamp, round_shift


def q15_multiply_half_up(a: int, b: int) -> int:
    return max(-32768, min(32767, (a * b + 2**14) >> 15))


def test_rounding_differs_at_negative_ties_only():
    draw = random.Random(4)
    pairs = [(draw.randint(-32767, 32767), draw.randint(-32767, 32767)) for _ in range(20000)]
    pairs += [(-1, 16384), (1, 16384), (-3, 16384), (3, -16384), (20000, 20000)]
    ties = 0
    for a, b in pairs:
        ours, theirs = clamp(round_shift(a * b, 15), 32767), q15_multiply_half_up(a, b)
        if (a * b) % 2**15 == 2**14 and a * b < 0:
            ties += 1
            assert ours == theirs - 1
        else:
            assert ours == theirs
        assert ours == -clamp(round_shift(-a * b, 15), 32767)
    assert ties >= 3


def test_values_of_the_basic_operators():
    """ITU-T G.191 Software Tools Library, basic operators: mult(20000, 20000) = 12207 truncates; rounding agrees here."""
    assert 20000 * 20000 >> 15 == 12207 == round_shift(20000 * 20000, 15)
    # add(32767, 1) = 32767, negate(−32768) = 32767: saturation to the largest number, which is symmetric here.
    assert clamp(32767 + 1, 32767) == 32767
    assert clamp(32768, 32767) == 32767 and clamp(-32768, 32767) == -32767
