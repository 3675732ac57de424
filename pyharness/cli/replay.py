"""slackwater replay: a recorded log through a controller, and telemetry."""

from __future__ import annotations

import argparse
from collections.abc import Iterable
from pathlib import Path

import numpy as np

from pyharness.cli.common import (
    UsageError,
    add_controller,
    add_sources,
    announce_mission,
    announce_sources,
    check_writable,
    progress,
    shown,
    table,
)
from pyharness.controllers import load_controller
from pyharness.flight import Interface, Sources
from pyharness.mission import demo_path, load_mission
from pyharness.replay import FIELDS, first_difference, read_log, read_telemetry, replay
from pyharness.replay.figure import replay_figure
from pyharness.replay.tables import frame_lines, trace_lines
from pyharness.replay.telemetry import cycles_without, restarts
from pyharness.replay.tell import clock_lines, status_rows, summary_rows
from pyharness.replay.tell_frames import counter_rows, frame_rows
from pyharness.review.style import save
from pyharness.scaling import Scaling, scale
from pyharness.whole_files import replacing


def add_to(commands) -> None:
    """Add the command."""
    parser = commands.add_parser(
        "replay",
        help="feed a recorded log to a controller, or unpack telemetry",
        description="Feed the log of a bench or of a flight to a controller, from reset on and without a plant, and tell what it answers; "
        "with --telemetry also hold recorded frames against that: exit status 1 if they differ. Without a log, unpack telemetry.",
    )
    parser.add_argument("log", nargs="?", metavar="LOG", help="CSV with a row for each cycle; see --columns")
    parser.add_argument(
        "--columns",
        action="store_true",
        help="print the columns of a log instead: unit, meaning, which may be left out",
    )
    parser.add_argument(
        "--mission",
        default=str(demo_path()),
        metavar="MISSION",
        help="mission file; default: the demo mission",
    )
    parser.add_argument("--telemetry", metavar="FILE", help="file of telemetry frames, one after the other")
    parser.add_argument(
        "--backward",
        action="store_true",
        help="take rows whose clock goes back as they are: it was set back, or restarted",
    )
    parser.add_argument(
        "--csv",
        metavar="FILE",
        help="write every integer that the controller answers, or the frames have, as a table",
    )
    parser.add_argument("--plot", metavar="FILE", help="write a figure of the replay, .png or .svg")
    add_controller(parser)
    add_sources(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Run the command."""
    if options.columns:
        print(
            table(
                [
                    ("column", "unit", "given", "meaning"),
                    *((field.title, field.unit, field.presence, field.meaning) for field in FIELDS),
                ]
            )
        )
        return 0
    _check(options)
    scaling = scale(load_mission(options.mission))
    sources = announce_sources(options)
    announce_mission(scaling)
    return (
        _run_log(options, scaling, sources)
        if options.log
        else _run_frames(options, scaling, Interface(sources))
    )


def _check(options: argparse.Namespace) -> None:
    if not options.log and not options.telemetry:
        raise UsageError("nothing to replay: name a LOG, or --telemetry FILE")
    if options.plot and not options.log:
        raise UsageError(f"--plot {options.plot}: needs a LOG")
    if options.plot and _kind(options.plot) not in ("png", "svg"):
        raise UsageError(f"--plot {options.plot}: must end in .png or .svg")
    for option, path in (("--csv", options.csv), ("--plot", options.plot)):
        if path:
            check_writable(option, Path(path))
            _check_is_no_input(option, Path(path), options)


def _check_is_no_input(option: str, path: Path, options: argparse.Namespace) -> None:
    for source in filter(None, (options.log, options.telemetry, options.mission)):
        if path.resolve() == Path(source).resolve():
            raise UsageError(f"{option} {path}: is also what is read; it would be replaced")


def _kind(path: str) -> str:
    return Path(path).suffix.lower().removeprefix(".")


def _run_log(options: argparse.Namespace, scaling: Scaling, sources: Sources) -> int:
    controller = load_controller(options.controller, sources)
    log = read_log(Path(options.log), controller.interface, options.backward)
    frames = read_telemetry(Path(options.telemetry), controller.interface) if options.telemetry else None
    with progress("replaying", len(log.inputs), "row") as bar:
        replayed = replay(log, scaling, controller, bar.update)
    print(
        f"log       {shown(log.source)}, {replayed.rows} rows, {replayed.time_s[-1]:g} s from first to last, controller {replayed.controller}"
    )
    for line in clock_lines(replayed):
        print(f"clock     {line}")
    print("\n" + table(summary_rows(replayed)))
    print("\n" + table(status_rows(replayed)))
    _write_table(options, trace_lines(replayed), replayed.rows)
    if options.plot:
        with replacing(Path(options.plot)) as temporary:
            save(replay_figure(replayed), temporary, _kind(options.plot))
        print(f"figure    {options.plot}")
    if frames is None:
        return 0
    difference = first_difference(frames, replayed.outputs)
    print(f"\ntelemetry {options.telemetry}: {len(frames)} frames, {difference or 'all as replayed'}")
    return 1 if difference else 0


def _run_frames(options: argparse.Namespace, scaling: Scaling, interface: Interface) -> int:
    frames = read_telemetry(Path(options.telemetry), interface)
    lost, resets = cycles_without(frames).sum(), restarts(frames).sum()
    print(f"telemetry {shown(options.telemetry)}, {len(frames)} frames, {lost} lost, {resets} resets")
    others = np.flatnonzero(frames["digest"] != scaling.config["digest"])
    if len(others):
        print(
            f"config    0x{frames['digest'][others[0]]:08x} in frame {others[0]}: not this mission's, so that rates stay in counts"
        )
    sized = None if len(others) else scaling
    print("\n" + table(frame_rows(frames, sized, interface)))
    print("\n" + table(counter_rows(frames)))
    _write_table(options, frame_lines(frames, sized), len(frames))
    return 0


def _write_table(options: argparse.Namespace, lines: Iterable[str], count: int) -> None:
    if not options.csv:
        return
    with (
        progress("writing", count, "row") as bar,
        replacing(Path(options.csv)) as temporary,
        temporary.open("w", encoding="utf-8", newline="\n") as file,
    ):
        for line in lines:
            file.write(line + "\n")
            bar.update()
    print(f"\ntable     {options.csv}")
