"""The host's clock in a log: µs in 32 bits, which wrap after 71.6 min."""

from __future__ import annotations

import numpy as np

HALF_WRAP = 2**31


def steps_us(start_us: np.ndarray) -> np.ndarray:
    """From each cycle's start to the next, (rows - 1,), in -2^31:2^31 - 1 µs: negative where the clock goes back."""
    return (np.diff(start_us.astype(np.int64)) + HALF_WRAP) % 2**32 - HALF_WRAP


def elapsed_s(start_us: np.ndarray, period_us: int) -> np.ndarray:
    """Time since the first cycle, (rows,), s. A step back counts as one period, so that time never falls."""
    steps = steps_us(start_us)
    return np.concatenate(([0.0], np.cumsum(np.where(steps < 0, period_us, steps)) * 1e-6))


def remarks(start_us: np.ndarray, period_us: int) -> list[tuple[int, str]]:
    """(row, what is odd about its clock) for rows that are more than half a period early or late, or repeated."""
    steps = steps_us(start_us)
    odd = np.flatnonzero(np.abs(steps - period_us) * 2 > period_us)
    return [(int(i) + 1, _told(int(steps[i]), period_us)) for i in odd]


def _told(step: int, period_us: int) -> str:
    if step < 0:
        return f"the clock goes back by {-step} µs"
    if step == 0:
        return "begins with the row before: a repeated cycle"
    if step < period_us:
        return f"begins {step} µs after the row before: less than half a period of {period_us} µs"
    missing = max(1, round(step / period_us) - 1)
    return f"{missing} cycle{'s' * (missing > 1)} missing: begins {step} µs after the row before, the period is {period_us} µs"
