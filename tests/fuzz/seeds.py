"""Writes the seed corpus from the golden vectors: configuration, state and inputs of 24 cycles, as they lie in this machine's memory.

    python tests/fuzz/seeds.py [FOLDER]
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

from pyharness.controllers import CController
from pyharness.flight import Library
from pyharness.flight.records import to_record
from pyharness.scaling import Integers
from pyharness.vectors import find_vectors, read_vector

HERE = Path(__file__).parent
CYCLES = 24
STRIDE = 97  # rows between two seeds of a file
AS_IT_IS = b"\0"  # the harness mends nothing


def seeds(path: Path, controller: CController) -> list[bytes]:
    """A few seeds from one vector file."""
    interface = controller.interface
    vector = read_vector(path, interface)
    controller.configure([Integers(vector.config)])
    config = to_record(interface.config, vector.config).tobytes()
    found = []
    for start in range(0, len(vector.inputs), STRIDE):
        state = controller.peek(0, "state").tobytes()
        found.append(AS_IT_IS + config + state + np.ascontiguousarray(vector.inputs[start : start + CYCLES]).tobytes())
        controller.run(vector.inputs[start : start + STRIDE])
    return found[:3]


def main(folder: Path) -> None:
    """Write them all."""
    controller = CController(Library())
    folder.mkdir(parents=True, exist_ok=True)
    for path in find_vectors(HERE.parents[1] / "vectors"):
        for number, seed in enumerate(seeds(path, controller)):
            (folder / f"{path.parent.name}-{path.stem}-{number}").write_bytes(seed)


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else HERE / "corpus")
