"""What several commands share: options, the mission, the sources, progress, tables."""

from __future__ import annotations

import argparse
import sys
import tempfile
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

from tqdm import tqdm

from pyharness.controllers import NAMES, Controller
from pyharness.flight import Sources, find_sources
from pyharness.mission import demo_path
from pyharness.scaling import Scaling
from pyharness.vectors import Verdict, check_folder, find_vectors

SHOW_AFTER_S = 2.0
MOST_CYCLES = 1_000_000
"""Longest flight of a command: its records are kept in memory."""


class UsageError(Exception):
    """The options do not make sense together, or a value is out of its range."""


def add_mission(parser: argparse.ArgumentParser) -> None:
    """The positional mission file."""
    parser.add_argument(
        "mission", nargs="?", default=str(demo_path()), metavar="MISSION", help="mission file (TOML); default: the demo mission"
    )


def add_sources(parser: argparse.ArgumentParser) -> None:
    """--sources."""
    parser.add_argument(
        "--sources", metavar="DIR", help="folder of the C sources (include/ and src/); default: the checkout's, else the packaged ones"
    )


def add_controller(parser: argparse.ArgumentParser) -> None:
    """--controller."""
    parser.add_argument("--controller", default="c", metavar="NAME", help=f"{NAMES}; default: c, the C sources built on this machine")


def announce_sources(options: argparse.Namespace) -> Sources:
    """Find the C sources and say which."""
    sources = find_sources(options.sources)
    print(f"sources   {shown(sources.root)} ({sources.digest})")
    return sources


def announce_mission(scaling: Scaling) -> None:
    """Say which mission and which configuration."""
    mission = scaling.mission
    print(f"mission   {mission.name} ({shown(mission.source)}, {mission.digest}), config 0x{scaling.config['digest']:08x}")


def shown(path: str | Path) -> str:
    """A path as people read it: relative to the current folder where it lies below it."""
    path, here = Path(path).absolute(), Path.cwd()
    return str(path.relative_to(here)) if path.is_relative_to(here) else str(path)


def check_writable(option: str, path: Path, make_folder: bool = False) -> None:
    """Raise UsageError if a file cannot be written there: before the work, not after it."""
    folder = path.parent
    try:
        if make_folder:
            folder.mkdir(parents=True, exist_ok=True)
        if not folder.is_dir():
            raise UsageError(f"{option} {path}: there is no folder {folder}")
        if path.is_dir():
            raise UsageError(f"{option} {path}: is a folder")
        with tempfile.TemporaryFile(dir=folder):
            pass
    except OSError as error:
        raise UsageError(f"{option} {path}: cannot be written: {error.strerror}") from None


@contextmanager
def progress(what: str, total: int | None = None, unit: str = "cycle") -> Iterator[tqdm]:
    """A progress bar on stderr that appears once the work has lasted 2 s."""
    with tqdm(
        total=total, desc=what, unit=unit, unit_scale=True, delay=SHOW_AFTER_S, leave=False, file=sys.stderr, dynamic_ncols=True, disable=None,
        mininterval=0.2,
    ) as bar:  # fmt: skip
        yield bar


def table(rows: Iterable[Sequence[str]], indent: str = "") -> str:
    """Columns side by side, as wide as they need to be; the last one is not padded."""
    rows = [list(map(str, row)) for row in rows]
    if not rows:
        return ""
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]) - 1)]
    return "\n".join(
        (indent + "  ".join([*(cell.ljust(w) for cell, w in zip(row, widths, strict=False)), row[-1]])).rstrip() for row in rows
    )


def add_start(parser: argparse.ArgumentParser) -> None:
    """--seed and --along-field: how a flight starts."""
    parser.add_argument("--seed", type=int, default=1, metavar="N", help="of attitude and sensor noise; default: 1")
    parser.add_argument("--along-field", action="store_true", help="turn the rate at the start along the field")


def check_seed(options: argparse.Namespace) -> int:
    """The seed. Raises UsageError if it is negative."""
    if options.seed < 0:
        raise UsageError(f"--seed: {options.seed}, must be 0 or more")
    return options.seed


def replay(folder: Path, controller: Controller, mission_path: str) -> list[Verdict]:
    """Replay every vector of a folder. Raises what `check_folder` raises."""
    with progress("replaying", len(find_vectors(folder)), "file") as bar:
        verdicts = []
        for verdict in check_folder(folder, controller, mission_path):
            verdicts.append(verdict)
            bar.update()
    return verdicts


def find_vector_folder(given: str | None) -> Path:
    """--vectors, ./vectors, or those of the checkout. Whether it holds any is for others to find."""
    if given is not None:
        return Path(given)
    here = Path("vectors")
    checkout = Path(__file__).resolve().parents[2] / "vectors"
    return here if here.is_dir() or not checkout.is_dir() else checkout
