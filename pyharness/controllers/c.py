"""The C controller: the sources built on this machine, or somebody's build of the same header."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from pyharness.controllers.face import Controller, Part
from pyharness.flight import Library
from pyharness.flight.records import to_record
from pyharness.scaling import Integers, Scaling


class CController(Controller):
    """The C sources built on this machine, or somebody's build of the same header."""

    def __init__(self, library: Library, name: str = "c"):
        self.name = name
        self.library = library
        self.interface = library.interface

    def configure(self, configs: Sequence[Scaling | Integers]) -> None:
        self._configs = np.zeros(len(configs), self.interface.config)
        for i, item in enumerate(configs):
            self._configs[i] = to_record(self.interface.config, item.config)
            self._refuse(i, self.library.init(self._configs[i]))
        self._states = np.zeros(len(configs), self.interface.state)
        self.reset()

    def reset(self) -> None:
        self.library.reset(self._states)

    def step(self, inputs: np.ndarray) -> np.ndarray:
        n = len(inputs)
        outputs = np.empty(n, self.interface.outputs)
        self.library.step_many(self._states[:n], self._configs[:n], np.ascontiguousarray(inputs), outputs)
        return outputs

    def run(self, inputs: np.ndarray) -> np.ndarray:
        outputs = np.empty(len(inputs), self.interface.outputs)
        self.library.run(self._states[:1], self._configs[:1], np.ascontiguousarray(inputs), outputs)
        return outputs

    def snapshot(self) -> np.ndarray:
        return self._states.copy()

    def restore(self, snapshot: np.ndarray) -> None:
        self._states[...] = snapshot

    def _memory(self, part: Part) -> np.ndarray:
        return self._states if part == "state" else self._configs

    def peek(self, index: int, part: Part) -> np.ndarray:
        return self._memory(part)[index : index + 1].copy().reshape(())

    def poke(self, index: int, part: Part, record: np.ndarray) -> None:
        self._memory(part)[index] = record

    def restart(self, index: int) -> None:
        self.library.reset(self._states[index : index + 1])
