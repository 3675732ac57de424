"""Files that were recorded somewhere else: their content, and the one error that they can raise."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

MOST_PROBLEMS = 20
"""Reading stops when so many are known."""


class RecordingError(Exception):
    """A log or telemetry file that cannot be used, with everything that is wrong with it, up to `MOST_PROBLEMS`.

    `source` is the file's path, `problems` one line of text each.
    """

    def __init__(self, source: object, problems: Sequence[str]) -> None:
        super().__init__(source, problems)
        self.source = str(source)
        self.problems = list(problems)

    def __str__(self) -> str:
        if len(self.problems) == 1:
            return f"{self.source}: {self.problems[0]}"
        more = ", reading stopped there" if len(self.problems) >= MOST_PROBLEMS else ""
        return "\n".join(
            [
                f"{self.source}: {len(self.problems)} problems{more}",
                *(f"  {problem}" for problem in self.problems),
            ]
        )


def content_of(path: Path) -> bytes:
    """The bytes of a file. Raises RecordingError if it cannot be read."""
    try:
        return path.read_bytes()
    except OSError as error:
        raise RecordingError(path, [f"cannot be read: {error.strerror}"]) from None
