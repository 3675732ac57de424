"""Arrays over a batch of spacecraft: the spacecraft is always the last axis."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike


def spacecraft_last(items: Iterable[ArrayLike]) -> np.ndarray:
    """One float array from one item per spacecraft: items of shape (…) become (…, N), contiguous."""
    return np.ascontiguousarray(np.moveaxis(np.array(list(items), dtype=float), 0, -1))


def cross(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """a × b of vectors (3, …), written out so that its rounding is the same everywhere."""
    return np.stack((
        a[1] * b[2] - a[2] * b[1],
        a[2] * b[0] - a[0] * b[2],
        a[0] * b[1] - a[1] * b[0],
    ))


def norm(a: np.ndarray) -> np.ndarray:
    """Euclidean norm over the leading axis."""
    return np.sqrt(np.add.reduce(a * a, axis=0))


def round_to(a: ArrayLike, bits: int) -> np.ndarray:
    """Nearest multiples of 2**-bits: the same bits on every machine unless a value sits on the edge of a
    step."""
    return np.rint(np.ldexp(a, bits)) * 2.0**-bits
