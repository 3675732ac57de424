"""A replay, or telemetry, as comma-separated text: every integer, and its physical value where it has one."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

import numpy as np

from pyharness.flight.records import columns, to_columns
from pyharness.replay.replayed import Replayed
from pyharness.scaling import Scaling

_CHUNK = 1000
"""Rows that are in memory as Python integers at a time."""


def trace_lines(replayed: Replayed) -> Iterator[str]:
    """The answers to a log, a line for each row after one of names: row, time, all outputs, and their physical values."""
    lead = (f"{row},{time:.6f}" for row, time in enumerate(replayed.time_s))
    yield from _lines("row,time_s", lead, replayed.outputs, replayed.scaling)


def frame_lines(frames: np.ndarray, scaling: Scaling | None) -> Iterator[str]:
    """Telemetry frames, a line for each after one of names; without physical values if there is no `scaling`."""
    yield from _lines("frame", map(str, range(len(frames))), frames, scaling)


def _lines(title: str, lead: Iterable[str], records: np.ndarray, scaling: Scaling | None) -> Iterator[str]:
    names = columns(records.dtype)
    sized = {i: size for i, name in enumerate(names) if scaling and (size := scaling.size_of(name))}
    yield ",".join([title, *names, *(f"{names[i]} [{size.unit}]" for i, size in sized.items())])
    chunks = (to_columns(records[i : i + _CHUNK]).tolist() for i in range(0, len(records), _CHUNK))
    for first, integers in zip(lead, (row for chunk in chunks for row in chunk), strict=True):
        physical = (f"{size.value(integers[i]):.9g}" for i, size in sized.items())
        yield ",".join([first, *map(str, integers), *physical])
