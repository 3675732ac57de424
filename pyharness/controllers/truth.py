"""The truth as a controller."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from pyharness import exact
from pyharness.controllers.exact import ExactController
from pyharness.controllers.face import ControllerError
from pyharness.exact import constants as mrd
from pyharness.flight.records import to_dict, to_tuple
from pyharness.scaling import Integers, Scaling
from pyharness.truth import Truth


class TruthController(ExactController):
    """The truth as a controller: the exact model decides, the float64 laws act. Its pulses differ by rounding only."""

    name = "truth"

    def configure(self, configs: Sequence[Scaling | Integers]) -> None:
        scalings = [item for item in configs if isinstance(item, Scaling)]
        if len(scalings) != len(configs):
            raise ControllerError("truth: needs the mission, not its integers alone")
        self._scalings = scalings
        super().configure(configs)

    def reset(self) -> None:
        super().reset()
        self._truths = [Truth([scaling]) for scaling in self._scalings]

    def restart(self, index: int) -> None:
        super().restart(index)
        self._truths[index] = Truth([self._scalings[index]])

    def step(self, inputs: np.ndarray) -> np.ndarray:
        rows = [self._step_one(i, inputs[i : i + 1]) for i in range(len(inputs))]
        return np.array(rows, self.interface.outputs)

    def _step_one(self, i: int, inputs: np.ndarray) -> tuple:
        config, before = self._configs[i], to_dict(inputs[0])
        state, outputs = exact.step(self._states[i], config, before)
        decided = np.array([to_tuple(self.interface.outputs, outputs)], self.interface.outputs)
        truth = self._truths[i].step(inputs, decided)
        if state["mode"] == mrd.MRD_MODE_DAMPING:
            ticks = tuple(int(t) for t in np.rint(truth.ticks[:, 0]))
            shortest = config["path"]["shortest_ticks"]
            ticks = exact.path_withhold(state["path"], tuple(t if abs(t) >= shortest else 0 for t in ticks))
            # A pulse that the exact model made and the truth does not make waits for no stamp.
            pending = zip(state["path"]["pending"], outputs["ticks"], ticks, strict=True)
            path = {**state["path"], "pending": tuple(0 if made and not true else p for p, made, true in pending)}
            state = {**state, "path": exact.path_commit(path, config["path"], before["path"], ticks)}
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
