"""The one error that a mission file can raise."""

from __future__ import annotations

from collections.abc import Sequence


class MissionError(Exception):
    """A mission file that cannot be flown, with everything that is wrong with it.

    `source` is the file's path, `problems` one line of text each; `whole_file`: the one problem is the file itself. Scaling raises it too, for numbers that are
    legal but cannot be carried by the integers on board.
    """

    def __init__(self, source: str, problems: Sequence[str], whole_file: bool = False) -> None:
        super().__init__(source, problems)
        self.whole_file = whole_file
        self.source = source
        self.problems = list(problems)

    def __str__(self) -> str:
        if self.whole_file:
            return f"{self.source}: {self.problems[0]}"
        count = "1 problem" if len(self.problems) == 1 else f"{len(self.problems)} problems"
        return "\n".join([f"{self.source}: {count}", *(f"  {problem}" for problem in self.problems)])
