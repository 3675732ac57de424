"""How numbers are written for people."""

from __future__ import annotations

import re


def percent(share: float, digits: int = 1) -> str:
    """A share as a percentage: "35.6 %"."""
    return f"{share * 100:.{digits}f} %"


_UNIT = re.compile(r"(?<=\d) (?=[^\W\d_]{1,2}\b|[%°])")


def tied(text: str) -> str:
    """The text with each number tied to the unit behind it, so that no line breaks between them."""
    return _UNIT.sub("\u00a0", text)
