"""Every way to run the controller, by name."""

from __future__ import annotations

from pathlib import Path

from pyharness.controllers.c import CController
from pyharness.controllers.exact import ExactController
from pyharness.controllers.face import Controller, ControllerError
from pyharness.controllers.truth import TruthController
from pyharness.flight import Interface, Library, Sources, find_sources

__all__ = ["NAMES", "CController", "Controller", "ControllerError", "ExactController", "TruthController", "load_controller"]

NAMES = "c, exact, truth or lib:PATH"


def load_controller(spec: str | Controller, sources: Sources | None = None) -> Controller:
    """A controller by name: `c`, `exact`, `truth`, `lib:PATH` (a shared library built from the same header).

    `sources` are those of the C and of the header, by default found as `find_sources` says. A Controller is returned as it is.
    Raises ControllerError for an unknown name, and what `Library` raises.
    """
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
