"""Thousands of cycles in a few hundred columns: what every picture of a whole flight is drawn from."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np


class Bins:
    """Cuts n cycles into at most `most` runs of nearly equal length. Results have one row for each run."""

    def __init__(self, n: int, most: int = 360):
        count = min(n, most)
        self.edges = np.arange(count + 1) * n // max(count, 1)

    @property
    def starts(self) -> np.ndarray:
        """First cycle of each run."""
        return self.edges[:-1]

    def least(self, values: np.ndarray) -> np.ndarray:
        """Smallest value of each run; NaN only where all are."""
        return np.fmin.reduceat(values, self.starts, axis=0)

    def greatest(self, values: np.ndarray) -> np.ndarray:
        """Largest value of each run; NaN only where all are."""
        return np.fmax.reduceat(values, self.starts, axis=0)

    def mean(self, values: np.ndarray) -> np.ndarray:
        """Mean of each run, of flags their share."""
        lengths = np.diff(self.edges).reshape(-1, *[1] * (values.ndim - 1))
        return np.add.reduceat(values.astype(float), self.starts, axis=0) / lengths

    def spans(self, flags: np.ndarray) -> Iterator[tuple[int, int]]:
        """(first cycle, end cycle) of each stretch of runs in which at least one flag is set."""
        hit = np.concatenate(([0], np.logical_or.reduceat(flags, self.starts).astype(int), [0]))
        change = np.diff(hit)
        yield from zip(
            self.edges[np.flatnonzero(change == 1)].tolist(),
            self.edges[np.flatnonzero(change == -1)].tolist(),
            strict=True,
        )
