"""What may be wrong with coils and their drivers."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class CoilHealth:
    """Health of the three channels of N spacecraft, each array (3, N). Channel i drives the coil `wiring[i]`.

    A command becomes a current in the driver, which the current sense reads, and that a dipole in the coil:

    current  what the driver makes of the command: 1 healthy, 0 open, 0.35 weak, −1 backward
    held     part of the full current, with its sign, that is on whatever is commanded: 0 healthy, 1 shorted on
    leads    of each coil, between its current and its dipole: 1, or −1 where they are reversed
    wiring   int, a permutation of 0, 1, 2 for each spacecraft
    """

    current: np.ndarray
    held: np.ndarray
    leads: np.ndarray
    wiring: np.ndarray

    @classmethod
    def nominal(cls, n: int) -> CoilHealth:
        """Nothing wrong with the coils of n spacecraft; arrays of its own, to be filled in."""
        return cls(np.ones((3, n)), np.zeros((3, n)), np.ones((3, n)), np.repeat(np.arange(3)[:, None], n, axis=1))

    def driven_by(self) -> np.ndarray:
        """The channel of each coil, (3, N). Raises ValueError if the wiring is no permutation."""
        wiring = np.asarray(self.wiring)
        wrong = np.flatnonzero((np.sort(wiring, axis=0) != np.arange(3)[:, None]).any(axis=0))
        if wrong.size:
            craft = wrong[0]
            given = wiring[:, craft].tolist()
            raise ValueError(f"wiring: {given} of spacecraft {craft}, must be a permutation of 0, 1, 2")
        return np.argsort(wiring, axis=0)
