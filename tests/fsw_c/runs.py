"""Running the C on nested dicts, for tests."""

from __future__ import annotations

import numpy as np

from pyharness.flight import Library
from pyharness.flight.records import to_record


class Bank:
    """One C controller."""

    def __init__(self, library: Library, config: dict):
        self.library, self.interface = library, library.interface
        self.config = to_record(self.interface.config, config).reshape(1)
        self.state = np.zeros(1, self.interface.state)
        library.reset(self.state)

    def run(self, sequence: list[dict]) -> np.ndarray:
        """Outputs (cycles,) of inputs given as nested dicts."""
        inputs = np.zeros(len(sequence), self.interface.inputs)
        for i, values in enumerate(sequence):
            inputs[i] = to_record(self.interface.inputs, values)
        outputs = np.zeros(len(sequence), self.interface.outputs)
        self.library.run(self.state, self.config, inputs, outputs)
        return outputs
