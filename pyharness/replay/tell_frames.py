"""Telemetry in words: rows of tables for people."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from pyharness.flight import Interface
from pyharness.flight.records import columns, to_columns
from pyharness.replay.telemetry import cycles_without, restarts
from pyharness.scaling import Scaling

MOST_FRAMES = 40
"""Shown, of those that tell something new."""


def frame_rows(
    frames: np.ndarray, scaling: Scaling | None, interface: Interface
) -> Iterator[tuple[str, ...]]:
    """The frames that tell something new, and the last. Rates are in counts where there is no `scaling`."""
    yield "frame", "cycle", "mode", "rate", "new"
    news = _news(frames, interface)
    telling = [i for i, told in enumerate(news) if told or i == len(frames) - 1]
    for i in telling[:MOST_FRAMES]:
        mode = interface.mode_name(int(frames["mode"][i]))
        yield str(i), str(frames["cycle"][i]), mode, _rate(frames[i], scaling), "; ".join(news[i])
    if len(telling) > MOST_FRAMES:
        yield "…", "", "", "", f"and {len(telling) - MOST_FRAMES} more frames like these"


def counter_rows(frames: np.ndarray) -> Iterator[tuple[str, str]]:
    """The counters of the last frame."""
    counters = frames["counters"][-1:]
    yield "counter", "at the end"
    yield from zip(columns(counters.dtype), map(str, to_columns(counters)[0]), strict=True)


def _news(frames: np.ndarray, interface: Interface) -> list[list[str]]:
    """For each frame: another mode than before it, lost cycles, a reset, and status bits that are set for the first time."""
    lost, anew = cycles_without(frames), restarts(frames)
    mode, status = frames["mode"], frames["status"]
    seen = np.bitwise_or.accumulate(status)
    first = np.concatenate((status[:1], status[1:] & ~seen[:-1]))
    news: list[list[str]] = [
        [f"first time: {text}" for text in interface.status_texts(int(bits))] for bits in first
    ]
    for i in range(1, len(frames)):
        if anew[i]:
            news[i].insert(0, "reset before it")
        if lost[i]:
            news[i].insert(0, f"{lost[i]} lost before it")
        if mode[i] != mode[i - 1]:
            news[i].insert(0, f"was {interface.mode_name(int(mode[i - 1]))}")
    return news


def _rate(frame: np.void, scaling: Scaling | None) -> str:
    if not frame["rate_valid"]:
        return "none"
    size = scaling.size_of("rate") if scaling else None
    return f"{size.value(int(frame['rate'])):.3f} {size.unit}" if size else f"{frame['rate']} counts"
