"""The columns of a log: which there are, what they hold, and which may be left out.

Their names and order are those of `mrd_inputs`, read from the header; this table adds unit, meaning and what stands in for
columns that are not there.
"""

from __future__ import annotations

import difflib
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pyharness.flight.records import columns
from pyharness.mission.wording import joined, shown

REQUIRED = "required"


@dataclass(frozen=True)
class Field:
    """A field of `mrd_inputs`: one column, or three, [0] to [2], for the axes or coils x, y, z."""

    name: str
    unit: str
    meaning: str
    group: str = REQUIRED  # the columns of any other group are given together, or not at all
    default: int = 0  # in every row of a log without them
    count: int = 1

    @property
    def title(self) -> str:
        """Its columns, as a table of them lists it."""
        return self.name if self.count == 1 else f"{self.name}[0] to [{self.count - 1}]"

    @property
    def presence(self) -> str:
        """Whether it may be left out, in words."""
        return REQUIRED if self.group == REQUIRED else f"with the group {self.group}, else {self.default}"


FIELDS = (
    Field("path.cycle_start_us", "µs", "start of the cycle on the host's clock, wraps at 2^32"),
    Field("path.sample_us", "µs", "mid-sample on the same clock; not looked at where mag_valid is 0"),
    Field("path.switch_off_us", "µs", "last actual switch-off of each coil on the same clock", count=3),
    Field("path.mag_raw", "raw count", "magnetometer, each axis", count=3),
    Field("path.gyro_raw", "raw count", "gyro, each axis", "gyro", count=3),
    Field("path.mag_valid", "flag", "0: no magnetometer sample in this cycle"),
    Field("path.gyro_valid", "flag", "0: no gyro sample in this cycle", "gyro"),
    Field("path.current_valid", "flag", "0: no reading of the coil currents in this cycle", "currents"),
    Field(
        "path.current_driven",
        "current count",
        "current at the end of each coil's pulse in the cycle before",
        "currents",
        count=3,
    ),
    Field(
        "path.current_sampled",
        "current count",
        "current of each coil while the magnetometer sampled",
        "currents",
        count=3,
    ),
    Field("separation_s", "s", "since separation; the default is past any hold-off", "separation", 2**32 - 1),
    Field("low_power", "flag", "not 0: the coils are to stay off", "power"),
    Field("command", "code", "MRD_COMMAND_*, 0: none", "command"),
    Field("command_key", "key", "with an arm command", "command"),
    Field("command_coil", "index", "with a bench command: 0, 1, 2", "command"),
    Field("command_ticks", "tick", "with a bench command: signed length of the pulse", "command"),
)
"""In the order of the columns."""

_BY_NAME = {field.name: field for field in FIELDS}


def field_of(column: str) -> Field:
    """The field that a column belongs to; one that only another header has is required and has no meaning here."""
    name = column.partition("[")[0]
    return _BY_NAME.get(name, Field(name, "", ""))


def limits_of(dtype: np.dtype) -> dict[str, tuple[int, int]]:
    """Column → least and greatest integer that fits, in the order of the columns."""
    return dict(zip(columns(dtype), _limits(dtype), strict=True))


def _limits(dtype: np.dtype) -> list[tuple[int, int]]:
    if dtype.subdtype:
        return _limits(dtype.base) * dtype.shape[0]
    if dtype.names is None:
        return [(int(np.iinfo(dtype).min), int(np.iinfo(dtype).max))]
    return [limits for name in dtype.names for limits in _limits(dtype[name])]


def header_problems(names: Sequence[str], known: Sequence[str]) -> list[str]:
    """What is wrong with the column names of a log, a line each: unknown, repeated, out of order, missing."""
    if not set(names) & set(known):
        return [
            f"no column names: this line must begin with {known[0]}; `slackwater replay --columns` lists them"
        ]
    problems, last = [], -1
    place: dict[str, int] = {}
    for number, name in enumerate(names, 1):
        if name not in known:
            near = difflib.get_close_matches(name, known, n=1)
            told = f", the nearest known name is {near[0]}" if near else ""
            problems.append(f"column {number}: {shown(name)} is no column of a log{told}")
        elif name in place:
            problems.append(f"column {number}: {name} is there already, as column {place[name]}")
        elif known.index(name) < last:
            problems.append(f"column {number}: {name} must stand before {known[last]}")
        else:
            last = known.index(name)
        place.setdefault(name, number)
    return problems + _missing(names, known)


def _missing(names: Sequence[str], known: Sequence[str]) -> list[str]:
    """Columns that are not there but must be, a line for each group."""
    problems = []
    for group in dict.fromkeys(field_of(column).group for column in known):
        members = [column for column in known if field_of(column).group == group]
        absent = [column for column in members if column not in names]
        if absent and (group == REQUIRED or len(absent) < len(members)):
            rule = (
                "required"
                if group == REQUIRED
                else f"the columns of the {group} are given together, or not at all"
            )
            problems.append(f"missing: {joined(absent)} ({rule})")
    return problems
