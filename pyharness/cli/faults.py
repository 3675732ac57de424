"""slackwater faults: every fault of the list, flown and judged."""

from __future__ import annotations

import argparse

from pyharness.cli.common import (
    UsageError,
    add_controller,
    add_mission,
    add_sources,
    announce_mission,
    announce_sources,
    progress,
    table,
)
from pyharness.controllers import Controller, load_controller
from pyharness.controllers.c import CController
from pyharness.faults import FAULTS, Matrix, Result, cases, fly_matrix, nominal_flight, watch
from pyharness.faults.bits import Tally, flip_every_bit
from pyharness.faults.false_alarms import count_alarms
from pyharness.loop import fly
from pyharness.mission import load_mission
from pyharness.scaling import Scaling, scale

MOST_RUNS = 100_000


def add_to(commands) -> None:
    """Add the command."""
    parser = commands.add_parser(
        "faults",
        help="fly every fault and show what comes of it",
        description="Fly every fault of the list at several moments of the mission, and flip every bit of the controller's memory and inputs: "
        "how soon each fault shows, what the coils do then, how the flight ends. Exit status 1 if anything ends outside what the list "
        "declares.",
    )
    add_mission(parser)
    what = parser.add_mutually_exclusive_group()
    what.add_argument("--only", metavar="NAMES", help="faults of these names alone, separated by commas; for a list: --only help")
    what.add_argument("--without", metavar="NAMES", help="all faults but these: WRONG_SIGN and TOO_FAST take orbits, and most of the time")
    what.add_argument("--bits", action="store_true", help="only flip every bit of state, configuration and inputs")
    what.add_argument("--false-alarms", type=int, metavar="N", help="instead fly N varied missions without a fault and count what shows")
    add_controller(parser)
    add_sources(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Run the command."""
    if options.only == "help":
        print("\n".join(sorted(fault.name for fault in FAULTS)))
        return 0
    names = None if options.only is None else _names("--only", options.only)
    if options.without is not None:
        names = frozenset(fault.name for fault in FAULTS) - _names("--without", options.without)
    runs = options.false_alarms
    if runs is not None and not 1 <= runs <= MOST_RUNS:
        raise UsageError(f"--false-alarms: {runs}, must be in [1, {MOST_RUNS}]")
    scaling = scale(load_mission(options.mission))
    controller = load_controller(options.controller, announce_sources(options))
    announce_mission(scaling)
    if runs is not None:
        return _false_alarms(scaling, runs, controller)
    good = True
    if not options.bits:
        good &= tell_matrix(fly_faults(scaling, controller, names), controller)
    if options.only is None:
        good &= _bits(scaling, controller, asked=options.bits)
    return 0 if good else 1


def _names(option: str, given: str) -> frozenset[str]:
    names = frozenset(name.strip().upper() for name in given.split(","))
    unknown = names - {fault.name for fault in FAULTS}
    if unknown:
        raise UsageError(f"{option}: no fault {', '.join(sorted(unknown))}; --only help lists them")
    return names


def fly_faults(scaling: Scaling, controller: Controller, names: frozenset[str] | None = None) -> Matrix:
    """The matrix, with a progress bar. Raises UsageError where the mission does not settle without a fault."""
    flight = nominal_flight(scaling)
    with progress("without a fault", flight.cycles) as bar:
        (nominal,) = watch([flight], controller, bar.update)
    try:
        planned = list(cases(nominal, names))
    except ValueError as error:
        raise UsageError(f"{scaling.mission.source}: {error}") from None
    with progress("faults", sum(case.flight.cycles for case in planned)) as bar:
        return fly_matrix(planned, nominal, controller, bar.update)


def tell_matrix(matrix: Matrix, controller: Controller) -> bool:
    """Print the matrix; whether all is as declared."""
    print("\n" + table([("fault", "moment", "shown after", "dipole then", "outcome", "final rate", ""), *map(_row, matrix.results)]))
    texts = controller.interface.header.texts
    for result in matrix.failed:
        fault = result.case.fault
        for problem in result.problems:
            print(f"FAIL      {texts[f'MRD_F_{fault.name}']}, {result.case.moment.name}: {problem}")
    good, total = len(matrix.results) - len(matrix.failed), len(matrix.results)
    print(f"\nfaults    {'PASS' if good == total else 'FAIL'}: {good} of {total} ended as declared")
    return good == total


def _row(result: Result) -> tuple[str, ...]:
    shown = "-" if result.shown_after is None else f"{result.shown_after} cycle{'s' if result.shown_after > 1 else ''}"
    dipole = "-" if result.shown_after is None else f"{result.worst_a_m2 * 1e3:.0f} mA m²"
    return (
        result.case.fault.name, result.case.moment.name, shown, dipole, result.outcome_text, f"{result.final_deg_s:.3g} °/s",
        "" if result.passed else "FAIL",
    )  # fmt: skip


def flip_bits(scaling: Scaling, controller: CController) -> list[Tally]:
    """Every bit flipped along the flight without a fault, with a progress bar."""
    flight = nominal_flight(scaling)
    with progress("recording", flight.cycles) as bar:
        (record,) = fly([flight], controller, bar.update)
    tallies = []
    with progress("flipping", None, "flip") as bar:
        for tally in flip_every_bit(record, controller):
            tallies.append(tally)
            bar.update(tally.tried)
    return tallies


def _bits(scaling: Scaling, controller: Controller, asked: bool) -> bool:
    if not isinstance(controller, CController):
        if asked:
            raise UsageError(f"--bits: {controller.name} is too slow for it, must be c or lib:PATH")
        return True
    tallies = flip_bits(scaling, controller)
    print("\n" + table([("moment", "bits of", "flipped", "caught at once", "no effect", "forgotten", "longest", "to the end", ""), *map(_tally, tallies)]))
    for tally in tallies:
        for example in tally.examples:
            print(f"FAIL      {tally.moment}, {tally.part}: {example}")
    good = all(tally.passed for tally in tallies)
    tried = {part: sum(tally.tried for tally in tallies if tally.part == part) for part in ("state", "config", "inputs")}
    caught = sum(tally.caught for tally in tallies)
    print(
        f"\nbits      {'PASS' if good else 'FAIL'}: {sum(tried.values())} flips, {tried['state'] + tried['config']} in state and configuration of which "
        f"{caught} were caught in the same cycle, {tried['inputs']} in inputs forgotten after at most "
        f"{max(tally.longest for tally in tallies if tally.part == 'inputs')} cycles, {sum(tally.wild for tally in tallies)} pulses beyond a limit"
    )
    return good


def _tally(tally: Tally) -> tuple[str, ...]:
    return (
        tally.moment, tally.part, str(tally.tried), str(tally.caught) if tally.part != "inputs" else "-", str(tally.unchanged),
        str(tally.forgotten), f"{tally.longest} cycles" if tally.forgotten else "-", str(tally.lasting), "" if tally.passed else "FAIL",
    )  # fmt: skip


def _false_alarms(scaling: Scaling, runs: int, controller: Controller) -> int:
    with progress("flying", runs, "flight") as bar:
        alarms = count_alarms(scaling.mission, runs, controller, progress=bar.update)
    texts = controller.interface.header.texts
    rows = [(name, texts[f"MRD_S_{name}"], f"{count} of {runs}") for name, count in alarms.shown.items()]
    print("\n" + table([("status bit", "", "flights that showed it"), *rows]))
    print(f"\nsettled   {alarms.settled} of {runs} within an orbit and a half")
    if alarms.shown["DIVERGING"]:
        print(f"guard     FAIL: {alarms.shown['DIVERGING']} of {runs} flights without a fault tripped it")
        return 1
    print(f"guard     PASS: no false alarm; less than {100 * alarms.bound('DIVERGING'):.2g} % of such flights, at 95 % confidence")
    return 0
