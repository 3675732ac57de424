"""What mrd.h declares, read from the header itself: declarations for cffi, constants, and the texts beside them."""

from __future__ import annotations

import re
import subprocess
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

from pyharness.flight.build import BuildError, compiler

_MARKER = re.compile(r'^#\s*(?:line\s+)?\d+\s+"(?P<file>[^"]*)"')
_ENUMERATOR = re.compile(r"^\s*(?P<name>MRD_\w+)\s*=\s*(?P<value>\d+),?\s*(?:/\*\s*(?P<text>.*?)\s*\*/)?\s*$")


@dataclass(frozen=True)
class Header:
    """The header's declarations and its enumerators."""

    declarations: str  # what cffi's cdef takes
    constants: dict[str, int]  # every MRD_ enumerator
    texts: dict[str, str]  # the comment beside an enumerator, where it has one

    def named(self, prefix: str) -> dict[int, str]:
        """Value → name without the prefix, for the enumerators that start with it: {5: "BLANKED", …}."""
        return {
            value: name.removeprefix(prefix)
            for name, value in self.constants.items()
            if name.startswith(prefix) and name != f"{prefix}COUNT"
        }


def read_header(path: Path) -> Header:
    """Preprocess and parse the header at `path`. Raises BuildError if the preprocessor refuses it."""
    return _read(path, path.read_bytes())


@lru_cache
def _read(path: Path, content: bytes) -> Header:
    done = subprocess.run([compiler(), "-E", str(path)], capture_output=True, text=True, check=False)
    if done.returncode != 0:
        said = done.stderr.strip() or "and said nothing"
        raise BuildError(
            f"{path} cannot be preprocessed: '{compiler()} -E' ended with status {done.returncode}: {said}; if this is not a C compiler, "
            "name another one in the environment variable CC"
        )
    constants, texts = {}, {}
    for line in content.decode().splitlines():
        if found := _ENUMERATOR.match(line):
            constants[found["name"]] = int(found["value"])
            if found["text"]:
                texts[found["name"]] = found["text"]
    for name, value in re.findall(r"\b(MRD_[A-Z]+(?:_[A-Z]+)*) = (\d+)[,} ]", content.decode()):
        constants[name] = int(value)
    return Header(_own_lines(done.stdout, path), constants, texts)


def _own_lines(preprocessed: str, path: Path) -> str:
    """The lines that stem from the header itself, not from what it includes."""
    kept, ours = [], False
    for line in preprocessed.splitlines():
        if marker := _MARKER.match(line):
            ours = Path(marker["file"]) == path
        elif ours:
            kept.append(line)
    return "\n".join(kept)
