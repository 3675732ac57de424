"""The time axis and the title that all figures of a whole flight share."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes

from pyharness.review.flown import Flown

_MINUTES_FROM_S = 600.0


def title_of(flown: Flown, what: str) -> str:
    """Mission and flight, each once: a single flight may bear its mission's name."""
    names = dict.fromkeys((flown.scaling.mission.name, flown.title))
    return f"{' · '.join(names)}: {what}"


def time_of(flown: Flown) -> tuple[np.ndarray, str]:
    """Time of each cycle for the axis, and its unit."""
    time = flown.record.time_s
    return (time / 60.0, "min") if time[-1] >= _MINUTES_FROM_S else (time, "s")


def time_edges(flown: Flown) -> np.ndarray:
    """Start of each cycle's stretch of the time axis, and the end of the last, (cycles + 1,)."""
    time, unit = time_of(flown)
    return np.append(time, time[-1] + flown.scaling.period_s / (60.0 if unit == "min" else 1.0))


def label_time(axes: Axes, flown: Flown) -> None:
    edge = time_edges(flown)
    axes.set_xlabel(f"time since the first sample [{time_of(flown)[1]}]")
    axes.set_xlim(edge[0], edge[-1])
