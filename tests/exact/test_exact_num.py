"""The vocabulary of the arithmetic on numbers worked out by hand."""

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pyharness.exact import num


@pytest.mark.parametrize(("x", "s", "rounded"), [
    (0, 1, 0), (1, 1, 1), (-1, 1, -1), (3, 1, 2), (-3, 1, -2), (5, 2, 1), (6, 2, 2), (-6, 2, -2), (7, 3, 1),
    (4, 3, 1), (3, 3, 0),
    (-3, 3, 0), (16383, 15, 0), (16384, 15, 1), (-16384, 15, -1),
])
def test_rounds_half_away_from_zero(x, s, rounded):
    assert num.round_shift(x, s) == rounded


@given(st.integers(-2**50, 2**50), st.integers(1, 47))
def test_rounding_is_odd_and_within_half(x, s):
    rounded = num.round_shift(x, s)
    assert num.round_shift(-x, s) == -rounded
    assert abs(Fraction(x, 2**s) - rounded) <= Fraction(1, 2)


@pytest.mark.parametrize(("x", "clamped"),
    [(32767, 32767), (32768, 32767), (-32767, -32767), (-32768, -32767), (0, 0)])
def test_clamp_is_symmetric(x, clamped):
    assert num.clamp(x, 32767) == clamped


@pytest.mark.parametrize(("values", "beyond"), [
    ((5, -5, 5), False), ((6, 0, 0), True), ((0, -6, 0), True), ((0, 0, 6), True), ((0, 6, 0), True),
    ((0, 0, -6), True), ((-6, 0, 0), True),
])
def test_exceeds_looks_at_every_element_and_both_signs(values, beyond):
    assert num.exceeds(values, 5) is beyond


@pytest.mark.parametrize(("x", "mantissa", "exponent"),
    [(32768, 32768, 0), (65535, 65535, 0), (65536, 32768, 1), (2**32 - 1, 65535, 16)])
def test_norm_shift_keeps_the_leading_bits(x, mantissa, exponent):
    assert num.norm_shift(x, 16) == (mantissa, exponent)


def test_counters_stop():
    assert (num.count(65534, 65535), num.count(65535, 65535)) == (65535, 65535)


@pytest.mark.parametrize(("x", "root"), [(0, 0), (3, 1), (4, 2), (99, 9), (100, 10), (3221028867, 56754)])
def test_isqrt_rounds_down(x, root):
    assert num.isqrt(x) == root


def test_signs_and_division():
    assert [num.with_sign(7, x) for x in (-2, 0, 3)] == [-7, 0, 7]
    assert (num.round_div(7, 2), num.round_div(5, 4), num.round_div(6, 4)) == (4, 1, 2)
