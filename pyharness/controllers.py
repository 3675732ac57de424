"""Every way to run the controller, with one face: configure, reset, step; integers in, integers out.

A controller here is a bank of N independent ones, because a plant flies N spacecraft at once; N = 1 is the ordinary case.
Inputs and outputs are numpy records with the fields of `mrd_inputs` and `mrd_outputs` (`Interface.inputs`, `.outputs`).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from pyharness import exact
from pyharness.flight import Interface, Library, Sources, find_sources
from pyharness.flight.records import to_dict, to_record, to_tuple
from pyharness.scaling import Integers, Scaling

NAMES = "c, exact, truth or lib:PATH"


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

    def run(self, inputs: np.ndarray) -> np.ndarray:
        """Many cycles of the first controller: inputs (rows,), returns outputs (rows,)."""
        return np.concatenate([self.step(inputs[i : i + 1]) for i in range(len(inputs))])

    def _refuse(self, index: int, code: int) -> None:
        if code:
            raise ControllerError(f"{self.name}: configuration {index} refused: {self.interface.refusal(code)}")


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


def load_controller(spec: str | Controller, sources: Sources | None = None) -> Controller:
    """A controller by name: `c`, `exact`, `truth`, `lib:PATH` (a shared library built from the same header).

    `sources` are those of the C and of the header, by default found as `find_sources` says. A Controller is returned as it is.
    Raises ControllerError for an unknown name, and what `Library` raises.
    """
    from pyharness.truth import TruthController  # it builds on this module

    if isinstance(spec, Controller):
        return spec
    sources = sources or find_sources()
    if spec == "c":
        return CController(Library(sources=sources))
    if spec == "exact":
        return ExactController(Interface(sources))
    if spec == "truth":
        return TruthController(Interface(sources))
    if spec.startswith("lib:"):
        path = Path(spec.removeprefix("lib:"))
        if not path.is_file():
            raise ControllerError(f"{spec}: there is no file {path}")
        return CController(Library(path, sources), name=spec)
    raise ControllerError(f"no controller {spec!r}, must be {NAMES}")
