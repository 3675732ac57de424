"""slackwater review: fly the mission, replay the vectors, write the page."""

from __future__ import annotations

import argparse
import shlex
import sys
from pathlib import Path

from pyharness.cli.common import (
    add_mission,
    add_sources,
    announce_mission,
    announce_sources,
    check_writable,
    find_vector_folder,
    progress,
    replay,
    shown,
)
from pyharness.cli.faults import flip_bits, fly_faults
from pyharness.compare import compare_with_truth
from pyharness.controllers import CController, load_controller
from pyharness.loop import fly
from pyharness.review import FaultsFlown, Flown, ReviewData, review_data, write_page
from pyharness.scenarios import LONG
from pyharness.vectors import Verdict, find_vectors
from pyharness.vectors.digests import known_digests, verdict

PAGE = "slackwater-review.html"


def add_to(commands) -> None:
    """Add the command."""
    parser = commands.add_parser(
        "review",
        help="fly, replay the vectors and write the review page",
        description="Fly the mission with the C controller, as it stands and starting along the field, until it should have settled; "
        "compare with the truth; replay the golden vectors; with --faults also fly every fault of the list and flip every bit; write one "
        "self-contained page for the reviewer. Exit status 1 if any check fails.",
    )
    add_mission(parser)
    parser.add_argument("--out", default=PAGE, metavar="FILE", help=f"the page; default: {PAGE}")
    parser.add_argument("--vectors", metavar="DIR", help="folder of the vectors; default: ./vectors, then the checkout's")
    parser.add_argument("--faults", action="store_true", help="also fly every fault and flip every bit, as 'slackwater faults' does: some minutes")
    add_sources(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Run the command."""
    check_writable("--out", Path(options.out))
    controller = load_controller("c", announce_sources(options))
    folder = find_vector_folder(options.vectors)
    find_vectors(folder)  # before the long flight: without vectors there is nothing to sign
    flights, digests = _fly(options.mission, controller, folder)
    vectors = [*replay(folder, controller, options.mission), *digests]
    faults = None
    if options.faults:
        scaling = flights[0].scaling
        faults = FaultsFlown(fly_faults(scaling, controller), tuple(flip_bits(scaling, controller)), controller.interface.header)
    data = review_data(flights, vectors, _command(options), faults=faults)
    write_page(data, Path(options.out))
    _tell(data, folder)
    print(f"page      {shown(options.out)}")
    return 0 if data.passed else 1


def _fly(mission_path: str, controller: CController, folder: Path) -> tuple[list[Flown], list[Verdict]]:
    flights = [scenario.flight(mission_path) for scenario in LONG]
    with progress("flying", max(flight.cycles for flight in flights)) as bar:
        records = fly(flights, controller, bar.update)
    flown = []
    with progress("comparing with the truth", len(records), "flight") as bar:
        for scenario, record in zip(LONG, records, strict=True):
            comparison = compare_with_truth(record.flight.scaling, record.inputs, record.outputs)
            flown.append(Flown(scenario.title, record, comparison, controller.interface))
            bar.update()
    # The same flights, hashed: they must be the ones that the exact model flew when the vectors were written.
    contents = known_digests(folder, records)
    return flown, [verdict(content, record) for content, record in contents]


def _command(options: argparse.Namespace) -> str:
    return shlex.join(["slackwater", *sys.argv[1:]]) if sys.argv[1:2] == ["review"] else "slackwater review"


def _tell(data: ReviewData, folder: Path) -> None:
    announce_mission(data.scaling)
    for flown in data.flights:
        rate, settled = flown.record.true_rate_deg_s, flown.settled_at
        when = "never settled" if settled is None else f"settled at {flown.record.time_s[settled]:.0f} s"
        print(f"flight    {flown.title}: {rate[0]:.1f} to {rate[-1]:.3f} °/s in {flown.cycles * flown.scaling.period_s:.0f} s, {when}")
    rows = sum(v.rows for v in data.vectors)
    equal = sum(v.passed for v in data.vectors)
    print(f"vectors   {equal} of {len(data.vectors)} passed, long flights included, {rows} rows, from {shown(folder)}")
    if data.faults:
        flown = len(data.faults.matrix.results)
        print(f"faults    {flown - len(data.faults.matrix.failed)} of {flown} flights ended as declared, {sum(t.tried for t in data.faults.tallies)} bits flipped")
    for check in data.failed:
        print(f"FAIL      {check.name}: {check.figure}")
    passed = len(data.checks) - len(data.failed)
    print(f"verdict   {'PASS' if data.passed else 'FAIL'}: {passed} of {len(data.checks)} checks hold")
