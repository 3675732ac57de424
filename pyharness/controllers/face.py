"""The face that every controller has: configure, reset, step; integers in, integers out.

A controller here is a bank of N independent ones, because a plant flies N spacecraft at once; N = 1 is the ordinary case.
Inputs and outputs are numpy records with the fields of `mrd_inputs` and `mrd_outputs` (`Interface.inputs`, `.outputs`).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from typing import Any, Literal

import numpy as np

from pyharness import exact
from pyharness.flight import Interface
from pyharness.flight.records import to_dict
from pyharness.scaling import Integers, Scaling

Part = Literal["state", "config"]


class ControllerError(Exception):
    """There is no such controller, or it refuses a configuration."""


class Controller(ABC):
    """A bank of N controllers. Subclass it to have one of your own flown, replayed and compared."""

    name: str
    interface: Interface

    @abstractmethod
    def configure(self, configs: Sequence[Scaling | Integers]) -> None:
        """Take N configurations and reset. Raises ControllerError, with the text of mrd.h, for one that is refused.

        Only the truth needs to know the physical sizes, so only it insists on `Scaling`.
        """

    @abstractmethod
    def reset(self) -> None:
        """Put all N states at their start."""

    @abstractmethod
    def step(self, inputs: np.ndarray) -> np.ndarray:
        """One cycle of the first n controllers: inputs (n,) records, n ≤ N; returns outputs (n,)."""

    @abstractmethod
    def snapshot(self) -> Any:
        """A copy of all that is carried from cycle to cycle."""

    @abstractmethod
    def restore(self, snapshot: Any) -> None:
        """Return to a snapshot of this controller."""

    @abstractmethod
    def peek(self, index: int, part: Part) -> np.ndarray:
        """A copy of one controller's state or configuration, as a record (shape ())."""

    @abstractmethod
    def poke(self, index: int, part: Part, record: np.ndarray) -> None:
        """Overwrite one controller's state or configuration, whatever is in it: as radiation does."""

    @abstractmethod
    def restart(self, index: int) -> None:
        """Put one state at its start."""

    def force_mode(self, index: int, mode: int) -> None:
        """Overwrite the mode of one controller, with the digest that goes with it."""
        record = self.peek(index, "state")
        record["mode"] = mode
        record["digest"] = exact.state_digest(to_dict(record))
        self.poke(index, "state", record)

    def run(self, inputs: np.ndarray) -> np.ndarray:
        """Many cycles of the first controller: inputs (rows,), returns outputs (rows,)."""
        return np.concatenate([self.step(inputs[i : i + 1]) for i in range(len(inputs))])

    def _refuse(self, index: int, code: int) -> None:
        if code:
            raise ControllerError(f"{self.name}: configuration {index} refused: {self.interface.refusal(code)}")
