"""The exact model as a controller."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from pyharness import exact
from pyharness.controllers.face import Controller, Part
from pyharness.flight import Interface
from pyharness.flight.records import to_dict, to_record, to_tuple
from pyharness.scaling import Integers, Scaling


class ExactController(Controller):
    """The exact model: unbounded Python integers that check their declared ranges."""

    name = "exact"

    def __init__(self, interface: Interface):
        self.interface = interface

    def configure(self, configs: Sequence[Scaling | Integers]) -> None:
        self._configs = [item.config for item in configs]
        for i, config in enumerate(self._configs):
            self._refuse(i, exact.init(config))
        self.reset()

    def reset(self) -> None:
        self._states = [exact.reset() for _ in self._configs]

    def step(self, inputs: np.ndarray) -> np.ndarray:
        rows = []
        for i, row in enumerate(inputs):
            self._states[i], outputs = exact.step(self._states[i], self._configs[i], to_dict(row))
            rows.append(to_tuple(self.interface.outputs, outputs))
        return np.array(rows, self.interface.outputs)

    def snapshot(self) -> list:
        return list(self._states)

    def restore(self, snapshot: list) -> None:
        self._states = list(snapshot)

    def peek(self, index: int, part: Part) -> np.ndarray:
        if part == "state":
            return to_record(self.interface.state, self._states[index])
        return to_record(self.interface.config, self._configs[index])

    def poke(self, index: int, part: Part, record: np.ndarray) -> None:
        memory = self._states if part == "state" else self._configs
        memory[index] = to_dict(record)

    def restart(self, index: int) -> None:
        self._states[index] = exact.reset()
