"""A replay in words: rows of tables for people."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from pyharness.mission import AXES
from pyharness.replay.clock import remarks
from pyharness.replay.replayed import Replayed
from pyharness.review.wording import percent

MOST_SHOWN = 20
"""Of one kind, before "and n more"."""


def clock_lines(replayed: Replayed) -> list[str]:
    """What is odd about the clock, by row."""
    log = replayed.log
    odd = remarks(log.inputs["path"]["cycle_start_us"], replayed.scaling.timeline.period_us)
    return _cut([f"{log.place(row)}: {told}" for row, told in odd])


def summary_rows(replayed: Replayed) -> Iterator[tuple[str, str]]:
    """Samples, modes, rate and saturation."""
    trusted = int(replayed.trusted.sum())
    yield "Samples", f"{trusted} trusted, {replayed.rows - trusted} rejected"
    yield "Modes", ", ".join(_cut([f"{name} from row {row}" for row, name in replayed.modes_entered()]))
    estimate = replayed.estimate_deg_s[-1]
    yield "Rate estimate at the end", "none" if np.isnan(estimate) else f"{estimate:.3f} °/s"
    if replayed.damping.any():
        shares = replayed.saturated[replayed.damping].mean(axis=0)
        yield (
            "Damping cycles saturated",
            ", ".join(f"{axis} {percent(share)}" for axis, share in zip(AXES, shares, strict=True)),
        )


def status_rows(replayed: Replayed) -> Iterator[tuple[str, str, str]]:
    """Each status bit that is seen: in how many rows, and the first of them."""
    yield "status", "rows", "first"
    for number, name in replayed.bits_seen():
        flags = replayed.bit(number)
        yield (
            replayed.interface.header.texts[f"MRD_S_{name}"],
            str(flags.sum()),
            replayed.log.place(int(np.argmax(flags))),
        )


def _cut(items: list[str]) -> list[str]:
    return items if len(items) <= MOST_SHOWN else [*items[:MOST_SHOWN], f"and {len(items) - MOST_SHOWN} more"]
