"""How values and keys are written in messages: on one line, short, in the file's own terms."""

from __future__ import annotations

import re
from collections.abc import Iterable
from datetime import datetime

_LONGEST = 60
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")


def shown(value: object) -> str:
    """A value as it may stand in a message, whatever it is and however long."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        # Python refuses to print integers of some thousand digits.
        return str(value) if abs(value) < 10**18 else f"an integer of {value.bit_length()} bits"
    if isinstance(value, float):
        return repr(float(value)).removesuffix(".0")
    if isinstance(value, str):
        text = value if len(value) <= _LONGEST else value[:_LONGEST] + "…"
        return f'"{text}"' if text.isprintable() else f'"{text.encode("unicode_escape").decode()}"'
    if isinstance(value, datetime):
        return value.isoformat().replace("+00:00", "Z")
    if isinstance(value, (list, tuple)):
        return f"a list of {len(value)}"
    if isinstance(value, dict):
        return "a table"
    return str(value)[:_LONGEST]


def quantity(value: object, unit: str) -> str:
    """A value with its unit, if it has one."""
    return f"{shown(value)} {unit}" if unit else shown(value)


def rounded(value: float, unit: str) -> str:
    """A computed number to six digits, with its unit."""
    return quantity(float(f"{value:.6g}"), unit)


def dotted(prefix: str, name: str) -> str:
    """The path of a key in a table; a name that is not a bare TOML key is quoted."""
    name = name if _BARE_KEY.fullmatch(name) else shown(name)
    return f"{prefix}.{name}" if prefix else name


def joined(items: Iterable[str]) -> str:
    """"a, b and c"."""
    *first, last = items
    return f"{', '.join(first)} and {last}" if first else last
