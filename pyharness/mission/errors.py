"""The one error that a mission file can raise."""

from __future__ import annotations

from collections.abc import Sequence


class MissionError(Exception):
    """A mission file that cannot be flown, with everything that is wrong with it.

    `source` is the file's path, `problems` one line of text each. Scaling raises it too, for numbers that are
    legal but cannot be carried by the integers on board.
    """

    def __init__(self, source: str, problems: Sequence[str]) -> None:
        super().__init__(source, problems)
        self.source = source
        self.problems = list(problems)

    def __str__(self) -> str:
        if len(self.problems) == 1 and self.problems[0].startswith(("is not", "cannot be read")):
            return f"{self.source}: {self.problems[0]}"  # about the file as a whole
        count = "1 problem" if len(self.problems) == 1 else f"{len(self.problems)} problems"
        return "\n".join([f"{self.source}: {count}", *(f"  {problem}" for problem in self.problems)])
