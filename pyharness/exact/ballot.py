"""A ballot: single votes against something do not count, a lasting share above one in five does."""

from __future__ import annotations

from pyharness.exact.num import Record, select, vmax, vmin
from pyharness.exact.ranges import check

AGAINST = 4  # one vote against outweighs four others
FULL = 64  # 16 votes against in a row


def clear_ballot() -> Record:
    """A ballot without votes."""
    return {"level": 0, "tripped": 0}


def vote(ballot: Record, against: bool) -> Record:
    """The ballot after one more vote: tripped when full, cleared when empty, otherwise as it was."""
    before = ballot["level"]
    level = check("ballot.level", select(against, vmin(FULL, before + AGAINST), vmax(0, before - 1)))
    tripped = ballot["tripped"]
    if level == FULL:
        tripped = 1
    elif level == 0:
        tripped = 0
    return {"level": level, "tripped": tripped}
