"""slackwater fly: one closed-loop flight."""

from __future__ import annotations

import argparse
import io
from pathlib import Path

import numpy as np

from pyharness.cli.common import (
    MOST_CYCLES,
    UsageError,
    add_controller,
    add_mission,
    add_sources,
    add_start,
    announce_mission,
    announce_sources,
    check_seed,
    check_writable,
    progress,
    table,
)
from pyharness.compare import compare_with_truth
from pyharness.controllers import load_controller
from pyharness.loop import Flight, fly, long_cycles
from pyharness.mission import load_mission
from pyharness.mission.schema import BY_PATH
from pyharness.replay import write_log
from pyharness.review import Flown, save_figures
from pyharness.review.numbers import numbers
from pyharness.scaling import Scaling, scale
from pyharness.whole_files import write_whole


def add_to(commands) -> None:
    """Add the command."""
    parser = commands.add_parser(
        "fly",
        help="fly a mission in closed loop",
        description="Fly a mission in closed loop, from tip-off until it should have settled, and tell how it went.",
    )
    add_mission(parser)
    length = parser.add_mutually_exclusive_group()
    length.add_argument("--cycles", type=int, metavar="N", help="length in control cycles")
    length.add_argument("--duration", type=float, metavar="S", help="length in seconds; default: an orbit, the hold-off and the dwell")
    parser.add_argument("--rate", type=float, nargs=3, metavar=("X", "Y", "Z"), help="body rate at the start, °/s; default: the tip-off rate")
    add_start(parser)
    parser.add_argument("--supply", type=float, metavar="V", help="supply voltage that drives the coils; default: nominal")
    parser.add_argument("--plot", metavar="DIR", help="write the figures into this folder")
    parser.add_argument("--format", choices=("png", "svg"), default="png", help="of the figures; default: png")
    parser.add_argument("--csv", metavar="FILE", help="write a table with a row for each cycle, in physical units")
    parser.add_argument("--log", metavar="FILE", help="write what the controller was given as a log, for `slackwater replay`")
    add_controller(parser)
    add_sources(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Run the command."""
    scaling = scale(load_mission(options.mission))
    flight = Flight(
        scaling, _cycles(options, scaling), check_seed(options), _rate(options), options.along_field, supply_v=_supply(options, scaling)
    )
    for option, path in (("--csv", options.csv), ("--log", options.log), ("--plot", options.plot and Path(options.plot) / "x")):
        if path:
            check_writable(option, Path(path), make_folder=option == "--plot")
    controller = load_controller(options.controller, announce_sources(options))
    announce_mission(scaling)
    with progress("flying", flight.cycles) as bar:
        (record,) = fly([flight], controller, bar.update)
    comparison = compare_with_truth(scaling, record.inputs, record.outputs)
    flown = Flown(scaling.mission.name, record, comparison, controller.interface)
    print(f"flight    {flight.cycles} cycles, {flight.cycles * scaling.period_s:g} s, seed {options.seed}, controller {controller.name}\n")
    print(table((label, value) for label, (value,) in numbers([flown])))
    if options.csv:
        write_whole(Path(options.csv), _csv(flown))
        print(f"\ntable     {options.csv}")
    if options.log:
        write_log(Path(options.log), record.inputs, [f"mission {scaling.mission.digest}, seed {flight.seed}"])
        print(f"log       {options.log}")
    if options.plot:
        paths = save_figures(flown, Path(options.plot), options.format)
        print(f"figures   {', '.join(map(str, paths))}")
    return 0


def _rate(options: argparse.Namespace) -> tuple[float, ...] | None:
    limits = BY_PATH["body.tip_off_deg_s"].limits
    for value in options.rate or ():
        if value not in limits:
            raise UsageError(f"--rate: {value:g} °/s, each must be in {limits} °/s")
    return tuple(options.rate) if options.rate else None


def _supply(options: argparse.Namespace, scaling: Scaling) -> float | None:
    supply = scaling.mission.supply
    if options.supply is not None and not supply.min_v <= options.supply <= supply.max_v:
        raise UsageError(f"--supply: {options.supply:g} V, must be in [{supply.min_v:g}, {supply.max_v:g}] V, the mission's range")
    return options.supply


def _cycles(options: argparse.Namespace, scaling: Scaling) -> int:
    if options.cycles is not None:
        cycles = options.cycles
    elif options.duration is not None and np.isfinite(options.duration):
        cycles = int(np.ceil(options.duration / scaling.period_s))
    else:
        cycles = long_cycles(scaling)
    if not 1 <= cycles <= MOST_CYCLES:
        raise UsageError(f"length: {cycles} cycles, must be in [1, {MOST_CYCLES}]")
    return cycles


def _csv(flown: Flown) -> str:
    record = flown.record
    columns = {"time_s": record.time_s}
    vectors = {
        "true_rate_deg_s": np.degrees(record.rate_rad_s),
        "true_field_nt": record.field_t * 1e9,
        "command_a_m2": flown.commanded_a_m2,
        "applied_a_m2": flown.applied_a_m2,
        "ticks": record.outputs["ticks"],
    }
    for name, values in vectors.items():
        columns |= {f"{name}_{axis}": values[:, i] for i, axis in enumerate("xyz")}
    columns["estimate_deg_s"] = flown.estimate_deg_s
    modes = [flown.interface.mode_name(int(mode)) for mode in record.outputs["mode"]]
    text = io.StringIO()
    text.write(",".join([*columns, "mode", "status"]) + "\n")
    for i, row in enumerate(zip(*columns.values(), strict=True)):
        cells = ["" if np.isnan(value) else f"{value + 0.0:.9g}" for value in row]  # + 0.0: no negative zero
        text.write(",".join([*cells, modes[i], f"0x{record.outputs['status'][i]:08x}"]) + "\n")
    return text.getvalue()
