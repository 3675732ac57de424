"""slackwater vectors: write, check and compare golden vectors."""

from __future__ import annotations

import argparse
from pathlib import Path

from pyharness.cli.common import (
    add_controller,
    add_sources,
    announce_sources,
    find_vector_folder,
    progress,
    replay,
    shown,
)
from pyharness.controllers import load_controller
from pyharness.flight import Interface
from pyharness.mission import demo_path
from pyharness.vectors import (
    VectorError,
    find_vectors,
    make_vectors,
    read_vector,
    tell_folders_apart,
    write_folder,
)
from pyharness.vectors.digests import check_digests
from pyharness.vectors.tell import tell_apart


def add_to(commands) -> None:
    """Add the command and its three parts."""
    parser = commands.add_parser(
        "vectors",
        help="write, check or compare golden vectors",
        description="Golden vectors: inputs of every cycle, and what the exact model answers, stage by stage.",
    )
    parts = parser.add_subparsers(dest="part", required=True, metavar="PART")

    write = parts.add_parser(
        "write", help="write all vectors anew",
        description="Fly every scenario with the exact model in the loop and write all vectors. The same mission gives the same bytes, on "
        "every machine; where something changed it is told in physical units.",
    )  # fmt: skip
    write.add_argument("--out", metavar="DIR", help="folder to write to; default: as for check")
    write.add_argument("--no-long", action="store_true", help="leave out the long flights under digests/")
    _add_mission(write)
    add_sources(write)
    write.set_defaults(run=run_write)

    check = parts.add_parser(
        "check", help="replay the vectors through a controller",
        description="Replay every vector through a controller and name the first row and stage that differs, in counts and in physical "
        "units. The truth is held to its bound instead of equality. Exit status 1 if anything differs, or if there are no vectors.",
    )  # fmt: skip
    check.add_argument("folder", nargs="?", metavar="DIR", help="folder of the vectors; default: ./vectors, then the checkout's")
    check.add_argument("--long", action="store_true", help="also fly the long flights under digests/ and compare their hashes")
    add_controller(check)
    _add_mission(check)
    add_sources(check)
    check.set_defaults(run=run_check)

    compare = parts.add_parser(
        "compare", help="tell two folders of vectors apart",
        description="Tell two folders of vectors apart, in physical units. Exit status 1 if they differ.",
    )  # fmt: skip
    compare.add_argument("a", metavar="A", help="one folder")
    compare.add_argument("b", metavar="B", help="the other")
    add_sources(compare)
    compare.set_defaults(run=run_compare)


def _add_mission(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--mission", default=str(demo_path()), metavar="MISSION", help="mission file; default: the demo mission")


def run_write(options: argparse.Namespace) -> int:
    """Write the vectors."""
    interface = Interface(announce_sources(options))
    folder = Path(options.out) if options.out else find_vector_folder(None)
    with progress("flying") as bar:

        def advance(done: int, total: int) -> None:
            bar.total = total
            bar.update(done - bar.n)

        files = make_vectors(options.mission, interface, not options.no_long, advance)
    before = _read_all(folder, interface)
    changed = write_folder(folder, files, keep_digests=options.no_long)
    print(f"vectors   {len(files)} files, {len(changed)} changed, in {shown(folder)}")
    for line in _told(before, folder, changed, interface):
        print(f"  {line}")
    return 0


def _read_all(folder: Path, interface: Interface) -> dict:
    try:
        return {path.relative_to(folder).as_posix(): read_vector(path, interface) for path in find_vectors(folder)}
    except VectorError:  # none yet, or of another header: nothing to compare with
        return {}


def _told(before: dict, folder: Path, changed: list[str], interface: Interface) -> list[str]:
    told = []
    for name in changed:
        if name.startswith("digests/"):
            told.append(f"{name}: a long flight, as a hash: {'changed or new' if (folder / name).is_file() else 'removed'}")
        elif name not in before:
            told.append(f"{name}: {'new' if (folder / name).is_file() else 'removed'}")
        elif not (folder / name).is_file():
            told.append(f"{name}: removed")
        else:
            told += [f"{name}: {line}" for line in tell_apart(before[name], read_vector(folder / name, interface))]
    return told


def run_check(options: argparse.Namespace) -> int:
    """Check the vectors."""
    sources = announce_sources(options)
    controller = load_controller(options.controller, sources)
    folder = find_vector_folder(options.folder)
    verdicts = replay(folder, controller, options.mission)
    if options.long:
        with progress("flying") as bar:
            verdicts += check_digests(folder, controller, options.mission, bar)
    for verdict in verdicts:
        print(f"{'pass' if verdict.passed else 'FAIL'}  {verdict.name:36} {verdict.rows:6} rows  {verdict.detail}")
    failed = sum(not verdict.passed for verdict in verdicts)
    rows = sum(verdict.rows for verdict in verdicts)
    print(f"\nvectors   {len(verdicts)} files, {rows} rows through {controller.name}, {failed} failed, from {shown(folder)}")
    return 1 if failed else 0


def run_compare(options: argparse.Namespace) -> int:
    """Compare two folders."""
    interface = Interface(announce_sources(options))
    told = tell_folders_apart(Path(options.a), Path(options.b), interface)
    print("\n".join(told) if told else "no difference")
    return 1 if told else 0
