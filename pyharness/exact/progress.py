"""Progress of the damping: does the turn of the field fall from window to window, or does it grow?"""

from __future__ import annotations

from pyharness.exact.fields import PROGRESS, zeros
from pyharness.exact.num import Record, flag, vmax, vmin
from pyharness.exact.ranges import check

FOUR = 4  # turns in a row of which the least counts: a single wild sample spoils two


def no_progress_yet() -> Record:
    """Before the first cycle of DAMPING: no window begun, no peak known."""
    return zeros(PROGRESS)


def take(progress: Record, turn: int) -> Record:
    """One more turn; the least of each four may become the peak of the present window."""
    least = turn if progress["in_four"] == 0 else vmin(progress["least"], turn)
    in_four = progress["in_four"] + 1
    if in_four < FOUR:
        return {**progress, "least": least, "in_four": in_four}
    present, last, before = progress["peak"]
    return {**progress, "peak": (vmax(present, least), last, before), "least": least, "in_four": 0}


def exceeds_share(peak: int, earlier: int, share: int) -> bool:
    """Whether there is an earlier peak, and this one is above share / 2^8 of it."""
    grown = check("progress.grown", 256 * peak)
    allowed = check("progress.allowed", share * earlier)
    return earlier != 0 and grown > allowed


def watch(progress: Record, supervisor: Record, trips: int, estimate: Record) -> tuple[Record, int]:
    """One cycle of DAMPING, after so many trips. Returns the new progress, and whether a window has just ended in divergence."""
    if estimate["across_valid"]:
        progress = take(progress, estimate["turn"])
    window = check("progress.window", progress["window"] + 1)
    if window < supervisor["window_cycles"]:
        return {**progress, "window": window}, 0
    present, last, before = progress["peak"]
    stalled = present > supervisor["stall_turn"] and exceeds_share(present, before, supervisor["progress"])
    grown = exceeds_share(present, last, supervisor["growth"])
    diverging = present > supervisor["guard_turn"] and (grown or (trips and stalled))
    ended = {**progress, "window": 0, "peak": (0, present, last), "in_four": 0, "stalled": flag(stalled)}
    return ended, flag(diverging)
