"""Where the C sources are: an explicit folder, the checkout this package runs from, or the copy packaged with it."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from pathlib import Path

_PACKAGE = Path(__file__).resolve().parent.parent


class SourcesError(Exception):
    """The folder does not hold the controller's sources."""


@dataclass(frozen=True)
class Sources:
    """One copy of `fsw_c`, and the digest of its content."""

    root: Path

    @property
    def include(self) -> Path:
        """Folder of the public header."""
        return self.root / "include"

    @property
    def header(self) -> Path:
        """The public header."""
        return self.include / "mrd.h"

    @property
    def c_files(self) -> list[Path]:
        """The translation units of the controller, in a fixed order."""
        return sorted((self.root / "src").glob("*.c"))

    @property
    def all_files(self) -> list[Path]:
        """Everything that a build depends on."""
        return [self.header, *sorted((self.root / "src").glob("*.[ch]"))]

    @property
    def digest(self) -> str:
        """SHA-256 over names and contents, first 12 hex digits. Read anew each time: an edit always shows."""
        sha = hashlib.sha256()
        for path in self.all_files:
            sha.update(path.name.encode() + b"\0" + path.read_bytes() + b"\0")
        return sha.hexdigest()[:12]


def find_sources(root: str | Path | None = None) -> Sources:
    """Look the sources up: `root` if given, else the checkout, else the packaged copy.

    Raises SourcesError, naming the folder, if there is no controller in it.
    """
    if root is not None:
        return _checked(Path(root))
    checkout = _PACKAGE.parent / "fsw_c"
    if checkout.is_dir() and (_PACKAGE.parent / "pyproject.toml").is_file():
        return _checked(checkout)
    return _checked(_PACKAGE / "_fsw_c")


def _checked(root: Path) -> Sources:
    sources = Sources(root.resolve())
    if not sources.header.is_file() or not sources.c_files:
        raise SourcesError(f"{root}: no controller sources here (expected include/mrd.h and src/*.c)")
    return sources
