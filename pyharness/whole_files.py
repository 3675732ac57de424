"""Files that are written whole or not at all: to a temporary name beside the file, then renamed."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path


@contextmanager
def replacing(path: Path) -> Iterator[Path]:
    """A temporary path to write to, which takes the place of `path` at the end; after an error the old file stays."""
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=".", suffix=f".{path.name}")
    os.close(handle)
    try:
        yield Path(name)
        os.chmod(name, 0o644)
        os.replace(name, path)
    except BaseException:
        os.unlink(name)
        raise


def write_whole(path: Path, text: str) -> None:
    """Write a text file whole or not at all, UTF-8 with plain newlines."""
    with replacing(path) as temporary:
        temporary.write_text(text, encoding="utf-8", newline="\n")
