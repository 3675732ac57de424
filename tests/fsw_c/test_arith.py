"""The arithmetic header and its functions, called one by one through a wrapper built beside the sources."""

from __future__ import annotations

import random
from math import isqrt

import cffi
import pytest

from pyharness.flight import find_sources
from pyharness.flight.build import build

WRAPPER = """
#include "arith.h"
uint32_t t_abs_s32(int32_t x) { return mrd_abs_s32(x); }
int32_t t_round_shift(int32_t x, uint16_t s) { return mrd_round_shift(x, s); }
int16_t t_clamp_s16(int32_t x) { return mrd_clamp_s16(x); }
uint16_t t_count_u16(uint16_t n) { return mrd_count_u16(n); }
uint32_t t_count_u32(uint32_t n) { return mrd_count_u32(n); }
uint32_t t_norm_sq(const int16_t v[3]) { return mrd_norm_sq(v); }
"""
DECLARATIONS = """
uint32_t t_abs_s32(int32_t x);
int32_t t_round_shift(int32_t x, uint16_t s);
int16_t t_clamp_s16(int32_t x);
uint16_t t_count_u16(uint16_t n);
uint32_t t_count_u32(uint32_t n);
uint32_t t_norm_sq(const int16_t v[3]);
uint16_t mrd_bits_u32(uint32_t x);
uint16_t mrd_reciprocal_u16(uint16_t d);
uint16_t mrd_div_u32_u16(uint32_t n, uint16_t d);
uint16_t mrd_isqrt_u32(uint32_t x);
"""


@pytest.fixture(scope="module")
def arith(tmp_path_factory):
    sources = find_sources()
    wrapper = tmp_path_factory.mktemp("arith") / "wrapper.c"
    wrapper.write_text(WRAPPER)
    src = sources.root / "src"
    path = build("arith", [wrapper, src / "arith.c"], [sources.include, src], [src / "arith.h", sources.header])
    ffi = cffi.FFI()
    ffi.cdef(DECLARATIONS)
    return ffi.dlopen(str(path))


def test_abs_is_exact_for_the_least_number(arith):
    for x in (0, 1, -1, 2**31 - 1, -(2**31) + 1, -(2**31)):
        assert arith.t_abs_s32(x) == abs(x)


def test_round_shift_rounds_half_away_from_zero(arith):
    """Half away from zero, unlike a Q15 multiply with rounding, which is half up (test_fixed_point.py)."""
    assert [arith.t_round_shift(x, 1) for x in (-5, -3, -1, 0, 1, 3, 5)] == [-3, -2, -1, 0, 1, 2, 3]
    draw = random.Random(1)
    for _ in range(20000):
        x, s = draw.randint(-(2**31), 2**31 - 1), draw.randint(1, 31)
        want = (abs(x) + (1 << (s - 1))) >> s
        assert arith.t_round_shift(x, s) == (want if x >= 0 else -want)


def test_round_shift_cannot_overflow_at_its_largest_sum(arith):
    """|x| + 2^(shift - 1) is largest at shift 31: 2^31 + 2^30, below 2^32."""
    assert arith.t_round_shift(-(2**31), 31) == -1
    assert arith.t_round_shift(2**31 - 1, 31) == 1
    assert arith.t_round_shift(2**30, 31) == 1
    assert arith.t_round_shift(2**30 - 1, 31) == 0


def test_clamp_saturates_symmetrically(arith):
    want = {32766: 32766, 32767: 32767, 32768: 32767, -32767: -32767, -32768: -32767, 2**31 - 1: 32767, -(2**31): -32767}
    assert {x: arith.t_clamp_s16(x) for x in want} == want


def test_counters_stop(arith):
    assert [arith.t_count_u16(n) for n in (0, 65534, 65535)] == [1, 65535, 65535]
    assert [arith.t_count_u32(n) for n in (0, 65535, 2**32 - 2, 2**32 - 1)] == [1, 65536, 2**32 - 1, 2**32 - 1]


def test_norm_sq_cannot_overflow(arith):
    assert arith.t_norm_sq([32767, -32767, 32767]) == 3 * 32767**2
    assert arith.t_norm_sq([-32768, -32768, -32768]) == 3 * 2**30


def test_bits_on_either_side_of_every_power(arith):
    assert arith.mrd_bits_u32(0) == 0
    for n in range(32):
        assert arith.mrd_bits_u32(1 << n) == n + 1
        assert arith.mrd_bits_u32((1 << n) - 1) == n
    assert arith.mrd_bits_u32(2**32 - 1) == 32


def test_reciprocal_all_divisors(arith):
    for d in range(32768, 65536):
        assert arith.mrd_reciprocal_u16(d) == min(65535, 2**31 // d)


def test_division_is_exact(arith):
    """For every divisor, at the quotients' edges; and for drawn numerators."""
    for d in range(1, 65536):
        for n in (d - 1, d, 65535 * d, 65535 * d + d - 1, 32768 * d - 1):
            assert arith.mrd_div_u32_u16(n, d) == n // d, (n, d)
    draw = random.Random(2)
    for _ in range(50000):
        d = draw.randint(1, 65535)
        n = draw.randint(0, 65536 * d - 1)
        assert arith.mrd_div_u32_u16(n, d) == n // d, (n, d)


def test_isqrt_on_either_side_of_every_square(arith):
    for r in range(1, 65536):
        assert arith.mrd_isqrt_u32(r * r) == r
        assert arith.mrd_isqrt_u32(r * r - 1) == r - 1
    assert arith.mrd_isqrt_u32(0) == 0
    assert arith.mrd_isqrt_u32(2**32 - 1) == isqrt(2**32 - 1)
