"""What happens to the counts of magnetometer and gyro on their way to the controller."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import Literal

import numpy as np

from pyharness.events.span import Span

Sensor = Literal["mag", "gyro"]


@dataclass(frozen=True)
class DropSample(Span):
    """The host has no field sample."""


@dataclass(frozen=True)
class DropGyro(Span):
    """The host has no gyro sample."""


@dataclass(frozen=True)
class CountsEvent(Span, ABC):
    """The counts of one sensor are not what it measured."""

    sensor: Sensor = "mag"

    @abstractmethod
    def counts(self, measured: np.ndarray, before: np.ndarray, cycle: int) -> np.ndarray:
        """What the host gets, (3,), for what was measured and for what it got in the cycle before; clipped to 16 bits by the caller."""


@dataclass(frozen=True)
class HoldCounts(CountsEvent):
    """The sensor hands out the same counts again and again."""

    def counts(self, measured: np.ndarray, before: np.ndarray, cycle: int) -> np.ndarray:
        return before


@dataclass(frozen=True)
class SetAxis(CountsEvent):
    """One axis reads this count, whatever it measures."""

    axis: int = 0
    count: int = 0

    def counts(self, measured: np.ndarray, before: np.ndarray, cycle: int) -> np.ndarray:
        return np.where(np.arange(3) == self.axis, self.count, measured)


@dataclass(frozen=True)
class ScaleCounts(CountsEvent):
    """All axes read `factor` times what they measure."""

    factor: float = 1.0

    def counts(self, measured: np.ndarray, before: np.ndarray, cycle: int) -> np.ndarray:
        return np.rint(measured * self.factor)


@dataclass(frozen=True)
class AddCounts(CountsEvent):
    """All axes are off by so much, plus so much more a cycle: a bias, or one that drifts."""

    offset: tuple[int, int, int] = (0, 0, 0)
    drift: tuple[float, float, float] = (0.0, 0.0, 0.0)

    def counts(self, measured: np.ndarray, before: np.ndarray, cycle: int) -> np.ndarray:
        return measured + self.offset + np.rint(np.array(self.drift) * (cycle - self.first))


@dataclass(frozen=True)
class AddNoise(CountsEvent):
    """Noise of up to ±`most` on each axis, drawn anew each cycle, the same on every machine."""

    most: int = 0

    def counts(self, measured: np.ndarray, before: np.ndarray, cycle: int) -> np.ndarray:
        words = np.random.PCG64((self.first, cycle, 3)).random_raw(3)
        return measured + (words % np.uint64(2 * self.most + 1)).astype(np.int64) - self.most


@dataclass(frozen=True)
class SwapBytes(CountsEvent):
    """The two bytes of each count change places."""

    def counts(self, measured: np.ndarray, before: np.ndarray, cycle: int) -> np.ndarray:
        return measured.astype(np.int16).byteswap().astype(np.int64)
