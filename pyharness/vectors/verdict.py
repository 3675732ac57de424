"""What a replay found in one vector file."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Verdict:
    """The outcome for one file."""

    name: str  # tier/name, without suffix
    purpose: str
    rows: int
    passed: bool
    detail: str  # the first difference, in counts and physical units, or how it agreed
