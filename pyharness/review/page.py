"""The review page: one self-contained HTML file that reads without JavaScript."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from jinja2 import Environment, FileSystemLoader, StrictUndefined
from markupsafe import Markup

from pyharness.describe import describe_config, describe_resolution
from pyharness.flight import Interface
from pyharness.mission import Mission
from pyharness.review.blanking import blanking_margins
from pyharness.review.checks import Check, checks
from pyharness.review.fault_checks import fault_checks
from pyharness.review.faults import FaultsFlown
from pyharness.review.figures import PLOTS, Plot
from pyharness.review.flown import Flown
from pyharness.review.numbers import numbers
from pyharness.review.style import inline_svg
from pyharness.review.tables import mission_rows, status_rows, timeline_rows
from pyharness.review.wording import tied
from pyharness.scaling import Scaling
from pyharness.vectors.verdict import Verdict
from pyharness.whole_files import write_whole

_TEMPLATE = "page.html.jinja"
_FURTHER_PLOTS = ("rates", "duty", "error")
"""Figures of the flights after the first."""


@dataclass(frozen=True)
class ReviewData:
    """All that the page shows. The first flight is the main one; all fly the same mission and integers."""

    interface: Interface
    flights: tuple[Flown, ...]
    vectors: tuple[Verdict, ...]
    checks: tuple[Check, ...]
    command: str  # the command line that made the page
    faults: FaultsFlown | None = None  # None: not flown, and the page claims nothing of them

    @property
    def scaling(self) -> Scaling:
        """The integers that flew."""
        return self.flights[0].scaling

    @property
    def mission(self) -> Mission:
        """The mission that flew."""
        return self.scaling.mission

    @property
    def failed(self) -> tuple[Check, ...]:
        """The checks that do not hold."""
        return tuple(check for check in self.checks if not check.passed)

    @property
    def passed(self) -> bool:
        """Whether every check holds."""
        return not self.failed


def review_data(
    flights: Sequence[Flown],
    vectors: Sequence[Verdict],
    command: str,
    settle_within_s: float | None = None,
    faults: FaultsFlown | None = None,
) -> ReviewData:
    """Data, checks worked out. `settle_within_s` as in `checks`. Raises ValueError without a flight."""
    if not flights:
        raise ValueError("flights: none, the page needs at least one")
    worked_out = checks(flights, vectors, settle_within_s) + (fault_checks(faults) if faults else [])
    return ReviewData(flights[0].interface, tuple(flights), tuple(vectors), tuple(worked_out), command, faults)


@dataclass(frozen=True)
class _Picture:
    plot: Plot
    flown: Flown
    svg: Markup


def _pictures(flights: Sequence[Flown]) -> Iterator[_Picture]:
    for index, flown in enumerate(flights):
        for plot in PLOTS:
            if index == 0 or plot.name in _FURTHER_PLOTS:
                name = f"flight{index + 1}-{plot.name}"
                svg = inline_svg(plot.draw(flown), name, f"{plot.title}, {flown.title}")
                yield _Picture(plot, flown, Markup(svg))  # its texts are escaped as XML already


def render(data: ReviewData) -> str:
    """The page as text. The same data give the same text: it holds no date, digests say what was shown."""
    environment = Environment(
        loader=FileSystemLoader(Path(__file__).parent),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    environment.filters["tied"] = tied
    return environment.get_template(_TEMPLATE).render(
        data=data,
        mission=data.mission,
        scaling=data.scaling,
        sources=data.interface.sources,
        numbers=numbers(data.flights),
        pictures=list(_pictures(data.flights)),
        timeline=timeline_rows(data.scaling),
        margins=blanking_margins(data.scaling),
        mission_rows=mission_rows(data.mission),
        resolution=describe_resolution(data.scaling),
        configuration=describe_config(data.scaling, data.interface),
        faults=data.faults,
        status_rows=status_rows(data.flights, data.interface.header),
    )


def write_page(data: ReviewData, path: Path) -> None:
    """Write the page whole or not at all."""
    write_whole(path, render(data))
