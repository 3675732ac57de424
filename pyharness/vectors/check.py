"""Replay vectors through a controller and name the first row and stage that differs."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np

from pyharness.compare import compare_with_truth
from pyharness.controllers import Controller, ControllerError, TruthController
from pyharness.flight.records import columns, to_columns
from pyharness.mission import load_mission
from pyharness.scaling import Integers, scale
from pyharness.vectors.files import VectorError, VectorFile, find_vectors, read_vector
from pyharness.vectors.verdict import Verdict

_AFTER_STAGES = {
    "rate": "estimate",
    "rate_valid": "estimate",
    "mode": "modes",
    "handover": "modes",
    "ticks": "commanded pulses",
    "status": "status word",
    "cycle": "counters",
    "counters": "counters",
    "digest": "configuration",
}
"""What follows the stages of the trace, in the order in which a step works it out."""


def stage_of(column: str) -> str:
    """The stage that a column of the outputs belongs to: "outputs.trace.derivative.factor" → "derivative"."""
    top, stage = _top_and_stage(column)
    return stage.replace("_", "-") if top == "trace" else _AFTER_STAGES[top]


def in_stage_order(names: list[str]) -> list[int]:
    """Indices of the output columns in the order in which a step works them out."""
    after = list(_AFTER_STAGES)
    tops = [_top_and_stage(name)[0] for name in names]
    return sorted(range(len(names)), key=lambda i: -1 if tops[i] == "trace" else after.index(tops[i]))


def _top_and_stage(column: str) -> tuple[str, str]:
    parts = column.removeprefix("outputs.").partition("[")[0].split(".")
    return parts[0], parts[1] if len(parts) > 1 else ""


def check_folder(folder: Path, controller: Controller, mission_path: str | None = None) -> Iterator[Verdict]:
    """Check every file of a folder, one verdict each. Raises NoVectors if there is none, VectorError if one cannot be read.

    `mission_path` is needed for the truth, which works in physical units.
    """
    for path in find_vectors(folder):
        yield check_vector(read_vector(path, controller.interface), controller, mission_path)


def check_vector(vector: VectorFile, controller: Controller, mission_path: str | None = None) -> Verdict:
    """Replay one file."""
    if isinstance(controller, TruthController):
        return _against_truth(vector, controller, mission_path)
    try:
        controller.configure([Integers(vector.config)])
    except ControllerError as error:
        return Verdict(vector.label, vector.purpose, len(vector.inputs), False, f"configuration: {error}")
    found = first_difference(vector, controller.run(vector.inputs))
    if found is None:
        return Verdict(vector.label, vector.purpose, len(vector.inputs), True, "every integer equal")
    return Verdict(vector.label, vector.purpose, len(vector.inputs), False, found)


def first_difference(vector: VectorFile, outputs: np.ndarray) -> str | None:
    """Row, stage and column of the first difference, in counts and physical units; None if there is none."""
    want, have = to_columns(vector.outputs), to_columns(outputs)
    rows = np.flatnonzero((want != have).any(axis=1))
    if not len(rows):
        return None
    row = rows[0]
    names = [f"outputs.{c}" for c in columns(vector.outputs.dtype)]
    column = next(i for i in in_stage_order(names) if want[row, i] != have[row, i])
    told = f"row {row}, stage {stage_of(names[column])}: {names[column]} is {have[row, column]}, expected {want[row, column]}"
    if size := vector.sizes.get(names[column]):
        told += f" ({size.value(have[row, column]):.6g} against {size.value(want[row, column]):.6g} {size.unit})"
    return f"{told}; {len(rows)} of {len(want)} rows differ"


def _against_truth(vector: VectorFile, controller: TruthController, mission_path: str | None) -> Verdict:
    if mission_path is None:
        raise VectorError("the truth needs the mission file that the vectors were written for")
    scaling = scale(load_mission(mission_path, vector.overrides or None))
    if scaling.config["digest"] != vector.config["digest"]:
        told = f"written for another mission: configuration {vector.config['digest']:08x}, this one has {scaling.config['digest']:08x}"
        return Verdict(vector.label, vector.purpose, len(vector.inputs), False, told)
    result = compare_with_truth(scaling, vector.inputs, vector.outputs)
    worst = result.command_error_a_m2.max(initial=0.0) * 1e3
    told = f"within {result.used:.2f} of the bound, at most {worst:.3g} mA m² apart" if result.within else (
        f"outside the bound: {max(result.used, result.used_ticks):.2f} of it, {worst:.3g} mA m² apart"
    )  # fmt: skip
    return Verdict(vector.label, vector.purpose, len(vector.inputs), result.within, told)
