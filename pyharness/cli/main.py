"""Parse the command line, run one command, and turn every expected failure into one clear message.

Exit status: 0 done, 1 a check failed, 2 the input cannot be used, 130 interrupted.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence

from pyharness import __version__
from pyharness.cli import faults, fly, replay, review, scale, trace, vectors
from pyharness.cli.common import UsageError
from pyharness.controllers import ControllerError
from pyharness.flight import BuildError, LayoutError, SourcesError
from pyharness.mission import MissionError
from pyharness.replay import RecordingError
from pyharness.vectors import NoVectors, VectorError

DESCRIPTION = """\
Fly, prove and compare a fixed-point controller that stops a satellite's tumble with magnetic coils.

A mission file in SI units becomes the controller's integers; the C controller flies it in closed loop against a plant; the
exact model writes golden vectors; C, exact model and truth are compared on them; a page shows it to the reviewer.
"""

EPILOG = """\
Every command takes a mission file (TOML); without one it takes the demo mission, which is invented. Start with:
  slackwater review            fly the demo, replay the vectors, write slackwater-review.html
  slackwater scale my.toml     what your mission becomes in integers
  slackwater COMMAND --help    what a command does

This is a reference, not flight-qualified. The polarity of every coil and sensor axis must be shown on the hardware.
"""

EXPECTED = (MissionError, BuildError, LayoutError, SourcesError, ControllerError, VectorError, RecordingError, UsageError, OSError)


def parser() -> argparse.ArgumentParser:
    """The whole command line."""
    top = argparse.ArgumentParser(
        prog="slackwater", description=DESCRIPTION, epilog=EPILOG, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    top.add_argument("--version", action="version", version=f"slackwater {__version__}")
    commands = top.add_subparsers(dest="command", required=True, metavar="COMMAND")
    for module in (scale, fly, faults, vectors, trace, replay, review):
        module.add_to(commands)
    return top


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command and return its exit status."""
    for stream in (sys.stdout, sys.stderr):
        stream.reconfigure(errors="backslashreplace")  # file names, and ° where the terminal cannot show it
    options = parser().parse_args(argv)
    try:
        status = options.run(options)
        sys.stdout.flush()
        return status
    except BrokenPipeError:  # the reader of our output went away, as `| head` does
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except EXPECTED as error:
        print(f"slackwater: {error}", file=sys.stderr)
        return 1 if isinstance(error, NoVectors) else 2
    except KeyboardInterrupt:
        print("\nslackwater: interrupted; nothing was changed that was not finished", file=sys.stderr)
        return 130
