"""How numbers are written for people."""

from __future__ import annotations


def percent(share: float, digits: int = 1) -> str:
    """A share as a percentage: "35.6 %"."""
    return f"{share * 100:.{digits}f} %"


def joined(values: object) -> str:
    """A number, or the numbers of a tuple with commas between them."""
    return ", ".join(map(str, values)) if isinstance(values, (tuple, list)) else str(values)
