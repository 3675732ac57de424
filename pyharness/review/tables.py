"""The tables of the page: the mission's keys, the timeline, the status bits."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from pyharness.flight.header import Header
from pyharness.mission import AXES, Mission
from pyharness.mission.schema import BY_PATH
from pyharness.mission.wording import shown
from pyharness.review.flown import Flown
from pyharness.scaling import Scaling


@dataclass(frozen=True)
class MissionRow:
    """One key of the mission file."""

    name: str
    value: str
    unit: str


def mission_rows(mission: Mission) -> list[MissionRow]:
    """Every key of the mission with its value as parsed, defaults filled in, and its unit."""
    rows = []
    for path in sorted(BY_PATH, key=_place):
        value, key = _mission_value(mission, path), BY_PATH[path]
        if value is not None:
            rows.append(MissionRow(path, _shown(value), "" if key.kind == "text" else key.unit))
    return rows


_TABLES = list(dict.fromkeys(path.partition(".")[0] for path in BY_PATH))


def _place(path: str) -> tuple[int, str]:
    """Order of the tables as in the mission file, and of the coils: the keys of one stay together."""
    table, _, rest = path.partition(".")
    return _TABLES.index(table), rest[0] if table == "coil" else ""


def _mission_value(mission: Mission, path: str) -> Any:
    """The value of a key, None where it is not used."""
    table, _, name = path.partition(".")
    if not name:
        return getattr(mission, table)
    if table == "coil":
        axis, _, name = name.partition(".")
        coil = mission.coil[AXES.index(axis)]
        return getattr(coil, name) if hasattr(coil, name) else getattr(coil.winding, name, None)
    if name.startswith("inertia_kg_m2."):
        row, column = (AXES.index(axis) for axis in name[-2:])
        return mission.body.inertia_kg_m2[row][column]
    return getattr(getattr(mission, table), name, None)


def _shown(value: Any) -> str:
    if isinstance(value, tuple):
        return f"[{', '.join(map(_shown, value))}]"
    if isinstance(value, float):
        value = float(f"{value:.9g}")  # a derived dipole has digits without meaning
    return value if isinstance(value, str) else shown(value)


def timeline_rows(scaling: Scaling) -> list[tuple[str, float, float]]:
    """(window, from, to) in ms from the start of the cycle."""
    t = scaling.timeline
    edges = (
        0,
        t.sample_start_us,
        t.sample_start_us + t.sample_us,
        t.drive_start_us,
        t.drive_end_us,
        t.period_us,
    )
    names = (
        "blanking: coils off, currents decay",
        "sample",
        "compute delay",
        "drive window",
        "rest: coils off",
    )
    return [(name, a / 1e3, b / 1e3) for name, a, b in zip(names, edges[:-1], edges[1:], strict=True)]


@dataclass(frozen=True)
class StatusRow:
    """A bit of the status word, what it means, and in how many cycles of each flight it was set."""

    bit: int
    name: str
    text: str
    counts: tuple[int, ...]


def status_rows(flights: Sequence[Flown], header: Header) -> list[StatusRow]:
    """The dictionary of the status word, with its text from the header."""
    return [
        StatusRow(
            bit, name, header.texts[f"MRD_S_{name}"], tuple(int(f.record.bit(bit).sum()) for f in flights)
        )
        for bit, name in sorted(header.named("MRD_S_").items())
    ]
