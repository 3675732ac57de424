"""Shared libraries from C sources, built at first use and cached by the digest of all that went into them."""

from __future__ import annotations

import hashlib
import os
import shutil
import subprocess
import tempfile
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

FLAGS = ("-std=c99", "-O2", "-fPIC", "-ffp-contract=off")


class BuildError(Exception):
    """There is no compiler, or it refused the sources."""


@dataclass(frozen=True)
class Variant:
    """One way to build: name, compiler flags, and what it adds to the controller's own sources."""

    name: str = "plain"
    flags: tuple[str, ...] = ()
    include: tuple[Path, ...] = ()
    extra: tuple[Path, ...] = ()


PLAIN = Variant()


def compiler() -> str:
    """The C compiler: $CC, else cc. Raises BuildError with the remedy if there is none."""
    name = os.environ.get("CC", "cc")
    path = shutil.which(name)
    if path is None:
        raise BuildError(
            f"no C compiler: '{name}' was not found. Install one (Debian, Ubuntu: apt install gcc; Fedora: dnf install "
            "gcc; macOS: xcode-select --install), or name yours in the environment variable CC"
        )
    return path


@lru_cache
def _version(path: str) -> bytes:
    return subprocess.run([path, "--version"], capture_output=True, check=False).stdout


def cache_folder() -> Path:
    """Where builds are kept: $XDG_CACHE_HOME/slackwater, else ~/.cache/slackwater."""
    base = os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache"
    return Path(base) / "slackwater"


def build(name: str, units: list[Path], include: list[Path], depends: list[Path], variant: Variant = PLAIN) -> Path:
    """Build `units` into a shared library and return its path; a build of the same content is reused.

    `depends` are the further files that the result depends on (headers). The library is built in a temporary folder and
    renamed, so that a broken or concurrent build never leaves half a file. Raises BuildError with the compiler's words.
    """
    cc = compiler()
    units = [*units, *variant.extra]
    include = [*variant.include, *include]
    flags = [*FLAGS, *variant.flags]
    headers = [path for folder in variant.include for path in sorted(folder.glob("*.h"))]
    sha = hashlib.sha256(repr((flags, cc, [str(p) for p in include])).encode() + _version(cc))
    for path in [*units, *depends, *headers]:
        sha.update(path.name.encode() + b"\0" + path.read_bytes() + b"\0")
    target = cache_folder() / f"{name}-{variant.name}-{sha.hexdigest()[:16]}.so"
    if target.exists():
        return target

    target.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(dir=target.parent) as scratch:
        result = Path(scratch) / target.name
        command = [cc, *flags, "-shared", *(f"-I{p}" for p in include), *map(str, units), "-o", str(result)]
        done = subprocess.run(command, capture_output=True, text=True, check=False)
        if done.returncode != 0:
            raise BuildError(f"{name} does not compile:\n{done.stderr.strip()}\ncommand: {' '.join(command)}")
        os.replace(result, target)
    return target
