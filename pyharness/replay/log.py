"""Logs: the inputs of a controller, a row for each cycle, as comma-separated decimal integers.

UTF-8, one line of column names (`columns.FIELDS`), then rows. A line that begins with # is a comment. Rows are counted from
0, comments not included, and lines from 1.
"""

from __future__ import annotations

import re
from array import array
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from pyharness.flight import Interface
from pyharness.flight.records import columns, from_columns, to_columns
from pyharness.mission.wording import shown
from pyharness.replay.clock import HALF_WRAP
from pyharness.replay.columns import field_of, header_problems, limits_of
from pyharness.replay.recording import MOST_PROBLEMS, RecordingError, content_of
from pyharness.whole_files import write_whole

MOST_ROWS = 1_000_000
"""Longest log: its records are kept in memory."""

_CLOCK = "path.cycle_start_us"
_INTEGER = re.compile(r"-?[0-9]{1,10}")


@dataclass(frozen=True)
class Log:
    """What a log holds."""

    source: Path
    inputs: np.ndarray  # (rows,) records mrd_inputs
    lines: np.ndarray  # (rows,) line number of each row
    given: tuple[str, ...]  # its columns

    def place(self, row: int) -> str:
        """How messages name a row."""
        return _place(row, int(self.lines[row]))


def write_log(path: Path, inputs: np.ndarray, comments: Sequence[str] = ()) -> None:
    """Write inputs (rows,) as a log with all columns, after comments of a line each. The file is written whole or not at all."""
    rows = [",".join(map(str, row)) for row in to_columns(inputs).tolist()]
    write_whole(
        path, "\n".join([*(f"# {line}" for line in comments), ",".join(columns(inputs.dtype)), *rows, ""])
    )


def read_log(path: Path, interface: Interface, backward: bool = False) -> Log:
    """Read a log. Raises RecordingError with everything that is missing, illegal or out of order, by row and line.

    Each cycle must begin later than the one before (modulo 2^32, by less than 2^31 µs), or at the same time: a repeated cycle
    can happen on board. With `backward` it may begin earlier: the clock was set back, or the computer restarted.
    """
    lines = list(_content(path))
    if not lines:
        raise RecordingError(path, ["the file is empty: no column names, no rows"])
    limits = limits_of(interface.inputs)
    number, header = lines[0]
    names = [name.strip() for name in header.split(",")]
    if problems := header_problems(names, list(limits)):
        raise RecordingError(path, [f"line {number}: {problem}" for problem in problems[:MOST_PROBLEMS]])
    if len(lines) == 1:
        raise RecordingError(path, ["no rows after the column names"])
    if len(lines) - 1 > MOST_ROWS:
        raise RecordingError(path, [f"{len(lines) - 1} rows, must be {MOST_ROWS} or less"])
    table = _table(path, lines[1:], {name: limits[name] for name in names}, backward)
    return Log(
        path, _records(interface, names, table), np.array([number for number, _ in lines[1:]]), tuple(names)
    )


def _content(path: Path) -> Iterator[tuple[int, str]]:
    """(line number, line) of all lines but comments, and empty ones at the end."""
    content = content_of(path)
    try:
        text = content.decode("utf-8-sig")  # spreadsheets put a mark at the start
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        raise RecordingError(
            path, [f"line {line}: not UTF-8: byte 0x{content[error.start]:02x} at offset {error.start}"]
        ) from None
    for number, line in enumerate(text.replace("\r\n", "\n").rstrip().split("\n") if text.strip() else [], 1):
        if not line.startswith("#"):
            yield number, line


def _table(
    path: Path, rows: list[tuple[int, str]], limits: dict[str, tuple[int, int]], backward: bool
) -> np.ndarray:
    """The integers of the rows, (rows, columns)."""
    values, problems, before = array("q"), [], None
    clock = list(limits).index(_CLOCK)
    for row, (number, line) in enumerate(rows):
        cells = [cell.strip() for cell in line.split(",")]
        found = _row_problems(cells, limits)
        if not found:
            integers = list(map(int, cells))
            if not backward and before is not None and (integers[clock] - before) % 2**32 >= HALF_WRAP:
                found = [f"{_CLOCK}: {integers[clock]}, must not be earlier than {before}, in the row before"]
            before = integers[clock]
            values.extend(integers)
        problems += [f"{_place(row, number)}: {problem}" for problem in found]
        if len(problems) >= MOST_PROBLEMS:
            break
    if problems:
        raise RecordingError(path, problems[:MOST_PROBLEMS])
    return np.frombuffer(values, np.int64).reshape(len(rows), len(limits))


def _row_problems(cells: list[str], limits: dict[str, tuple[int, int]]) -> list[str]:
    """What is wrong with the cells of one row."""
    if len(cells) != len(limits):
        told = f"{len(cells)} cell{'s' * (len(cells) > 1)}, must be {len(limits)}"
        return [f"{told}: ends before {list(limits)[len(cells)]}" if len(cells) < len(limits) else told]
    return [
        f"{name}: {shown(cell) if cell else 'missing'}, must be an integer in [{low}, {high}]"
        for cell, (name, (low, high)) in zip(cells, limits.items(), strict=True)
        if not (_INTEGER.fullmatch(cell) and low <= int(cell) <= high)
    ]


def _records(interface: Interface, names: list[str], table: np.ndarray) -> np.ndarray:
    """Records with the given columns; the others have their defaults."""
    known = columns(interface.inputs)
    whole = np.tile(np.array([field_of(name).default for name in known], np.int64), (len(table), 1))
    whole[:, [known.index(name) for name in names]] = table
    return from_columns(interface.inputs, whole)


def _place(row: int, line: int) -> str:
    return f"row {row} (line {line})"
