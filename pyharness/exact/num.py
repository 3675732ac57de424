"""The vocabulary of the arithmetic: what the stages do to a number beyond + - * // >> % and comparisons.

Arguments are Python integers and results are exact. The stages name each such operation here, and only
here, so that another number type (an interval, say) needs its own answer in this one place. None of these
functions changes its arguments, and none has a side effect.
"""

from __future__ import annotations

from math import isqrt as _isqrt
from typing import Any

Vector = tuple[int, int, int]
Record = dict[str, Any]  # one struct of mrd.h: scalars, tuples of scalars, and nested records

WRAP = 2**32  # stamps and digests are taken modulo this
INT16_MAX = 32767
UINT16_MAX = 65535


def round_shift(x: int, s: int) -> int:
    """x / 2**s rounded half away from zero, s ≥ 1. Odd in x."""
    magnitude = (abs(x) + (1 << (s - 1))) >> s
    return magnitude if x >= 0 else -magnitude


def clamp(x: int, n: int) -> int:
    """x limited to −n:n. Odd in x."""
    return -n if x < -n else n if x > n else x


def limit(x: int, lo: int, hi: int) -> int:
    """x limited to lo:hi."""
    return lo if x < lo else hi if x > hi else x


def with_sign(magnitude: int, x: int) -> int:
    """sign(x) · magnitude."""
    return magnitude if x > 0 else -magnitude if x < 0 else 0


def square(x: int) -> int:
    """x², never negative."""
    return x * x


def vmax(x: int, y: int) -> int:
    """The greater of two."""
    return x if x > y else y


def vmin(x: int, y: int) -> int:
    """The lesser of two."""
    return x if x < y else y


def largest(values: Vector) -> int:
    """The greatest magnitude among the elements."""
    return max(map(abs, values))


def exceeds(values: Vector, n: int) -> bool:
    """Whether any element has a magnitude above n ≥ 0."""
    x, y, z = values
    return not (-n <= x <= n and -n <= y <= n and -n <= z <= n)


def select(condition: bool, x: int, y: int) -> int:
    """x where the condition holds, otherwise y: a choice of values that is no branch."""
    return x if condition else y


def flag(condition: bool) -> int:
    """1 where the condition holds, otherwise 0."""
    return 1 if condition else 0


def bit(condition: bool, number: int) -> int:
    """The status word with this one bit where the condition holds, otherwise 0."""
    return 1 << number if condition else 0


def bits(x: int) -> int:
    """Length of x ≥ 1 in binary: 2**(bits−1) ≤ x < 2**bits."""
    return x.bit_length()


def norm_shift(x: int, width: int) -> tuple[int, int]:
    """(x >> e, e) with e = bits(x) − width ≥ 0: the leading `width` bits of x, the first of them 1."""
    e = x.bit_length() - width
    return x >> e, e


def floor_div(x: int, y: int) -> int:
    """x / y rounded down, x ≥ 0 and y ≥ 1."""
    return x // y


def round_div(x: int, y: int) -> int:
    """x / y rounded to the nearest, (x + y // 2) // y, x ≥ 0 and y ≥ 1."""
    return (x + y // 2) // y


def isqrt(x: int) -> int:
    """The largest r with r² ≤ x."""
    return _isqrt(x)


def count(x: int, greatest: int) -> int:
    """x plus 1; a counter stops at its greatest value."""
    return x + 1 if x < greatest else greatest
