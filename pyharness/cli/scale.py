"""slackwater scale: the integers of a mission."""

from __future__ import annotations

import argparse
import json
from pathlib import Path

from pyharness.cli.common import add_mission, add_sources, announce_mission, announce_sources, check_writable, table
from pyharness.describe import c_header, describe_config, describe_resolution
from pyharness.flight import Interface, find_sources
from pyharness.mission import load_mission
from pyharness.mission.schema import KEYS
from pyharness.scaling import scale
from pyharness.whole_files import write_whole


def add_to(commands) -> None:
    """Add the command."""
    parser = commands.add_parser(
        "scale",
        help="turn a mission into the controller's integers",
        description="Turn a mission file into the controller's integer configuration and show what each integer stands for.",
    )
    add_mission(parser)
    parser.add_argument("--header", metavar="FILE", help="also write the configuration as a C header")
    parser.add_argument("--json", action="store_true", help="print the bare integers as JSON, for other tools")
    parser.add_argument("--keys", action="store_true", help="print every key of a mission file instead: unit, legal values, default, meaning")
    add_sources(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Run the command."""
    if options.keys:
        print("\n".join(f"{key.path}\n    {key.expected()}; default: {key.default_text}\n    {key.meaning}" for key in KEYS))
        return 0
    scaling = scale(load_mission(options.mission))
    if options.header:
        check_writable("--header", Path(options.header))
    if options.json:
        interface = Interface(find_sources(options.sources))
        print(json.dumps(scaling.config, indent=2))
    else:
        interface = Interface(announce_sources(options))
        announce_mission(scaling)
        print("\n" + table(describe_resolution(scaling)) + "\n")
        rows = [(row.name, " ".join(map(str, row.integers)), row.value) for row in describe_config(scaling, interface)]
        print(table([("field", "integers", "meaning"), *rows]))
    if options.header:
        write_whole(Path(options.header), c_header(scaling, interface))
        if not options.json:
            print(f"\nwritten   {options.header}")
    return 0
