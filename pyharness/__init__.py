"""Slackwater's public Python face: load a controller, configure it from a mission, step it, hold it to the truth.

    scaling = scale(load_mission())
    controller = load_controller("c")
    controller.configure([scaling])
    outputs = controller.run(inputs)
    compare_with_truth(scaling, inputs, outputs).within
"""

from __future__ import annotations

import numpy as np

from pyharness.compare import Comparison, compare_with_truth
from pyharness.controllers import Controller, ControllerError, load_controller
from pyharness.loop import Flight, Record, fly
from pyharness.mission import Mission, MissionError, demo_path
from pyharness.mission import load_mission as _load_mission
from pyharness.scaling import Scaling, scale
from pyharness.vectors.unit import quiet_cycles

__version__ = "0.1.0"

__all__ = [
    "Comparison", "Controller", "ControllerError", "Flight", "Mission", "MissionError", "Record", "Scaling", "compare_with_truth",
    "demo_path", "fly", "load_controller", "load_mission", "quiet_inputs", "scale",
]


def load_mission(path: str | None = None, overrides: dict | None = None) -> Mission:
    """Load and check a mission file, by default the demo; `overrides` is laid over it. Raises MissionError."""
    return _load_mission(demo_path() if path is None else path, overrides)


def quiet_inputs(scaling: Scaling, controller: Controller, cycles: int) -> np.ndarray:
    """Inputs (cycles,) to change and step: on time, with a steady field, no rate, coils long off, hold-off over."""
    return quiet_cycles(cycles, scaling.config["path"], controller.interface.inputs)
