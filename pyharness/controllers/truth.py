"""The truth as a controller."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from pyharness import exact
from pyharness.controllers.face import Controller, ControllerError
from pyharness.exact import constants as mrd
from pyharness.flight import Interface
from pyharness.flight.records import to_dict, to_tuple
from pyharness.scaling import Integers, Scaling
from pyharness.truth import Truth


class TruthController(Controller):
    """The truth as a controller: the exact model decides, the float64 laws act. Its pulses differ by rounding only."""

    name = "truth"

    def __init__(self, interface: Interface):
        self.interface = interface

    def configure(self, configs: Sequence[Scaling | Integers]) -> None:
        self._scalings = [item for item in configs if isinstance(item, Scaling)]
        if len(self._scalings) != len(configs):
            raise ControllerError("truth: needs the mission, not its integers alone")
        for i, scaling in enumerate(self._scalings):
            self._refuse(i, exact.init(scaling.config))
        self.reset()

    def reset(self) -> None:
        self._states = [exact.reset() for _ in self._scalings]
        self._truths = [Truth([scaling]) for scaling in self._scalings]

    def step(self, inputs: np.ndarray) -> np.ndarray:
        rows = [self._step_one(i, inputs[i : i + 1]) for i in range(len(inputs))]
        return np.array(rows, self.interface.outputs)

    def _step_one(self, i: int, inputs: np.ndarray) -> tuple:
        config = self._scalings[i].config
        state, outputs = exact.step(self._states[i], config, to_dict(inputs[0]))
        decided = np.array([to_tuple(self.interface.outputs, outputs)], self.interface.outputs)
        truth = self._truths[i].step(inputs, decided)
        if state["mode"] == mrd.MRD_MODE_DAMPING:
            ticks = tuple(int(t) for t in np.rint(truth.ticks[:, 0]))
            shortest = config["path"]["shortest_ticks"]
            ticks = tuple(t if abs(t) >= shortest else 0 for t in ticks)
            # A pulse that the exact model made and the truth does not make waits for no stamp.
            pending = zip(state["path"]["pending"], outputs["ticks"], ticks, strict=True)
            path = {**state["path"], "pending": tuple(0 if made and not true else p for p, made, true in pending)}
            state = {**state, "path": exact.path_commit(path, config["path"], to_dict(inputs[0])["path"], ticks)}
            outputs["ticks"] = ticks
            state["digest"] = exact.state_digest(state)
        self._states[i] = state
        return to_tuple(self.interface.outputs, outputs)

    def snapshot(self) -> tuple:
        return list(self._states), [truth.snapshot() for truth in self._truths]

    def restore(self, snapshot: tuple) -> None:
        self._states = list(snapshot[0])
        for truth, kept in zip(self._truths, snapshot[1], strict=True):
            truth.restore(kept)
