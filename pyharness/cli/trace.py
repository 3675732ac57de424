"""slackwater trace: one cycle, stage by stage, integers beside physical values."""

from __future__ import annotations

import argparse

from pyharness.cli.common import (
    MOST_CYCLES,
    UsageError,
    add_controller,
    add_mission,
    add_sources,
    add_start,
    announce_mission,
    announce_sources,
    check_seed,
    progress,
    table,
)
from pyharness.controllers import load_controller
from pyharness.flight import Interface
from pyharness.flight.records import columns, to_columns
from pyharness.loop import Flight, Record, fly
from pyharness.mission import load_mission
from pyharness.scaling import Scaling, scale
from pyharness.truth import Truth, TruthStep
from pyharness.vectors.check import in_stage_order, stage_of


def add_to(commands) -> None:
    """Add the command."""
    parser = commands.add_parser(
        "trace",
        help="show one cycle stage by stage",
        description="Fly a mission up to one cycle and show that cycle: inputs, every stage's integers with their physical values, "
        "what the status word says, and the truth beside the command.",
    )
    add_mission(parser)
    parser.add_argument("--cycle", type=int, default=200, metavar="N", help="which cycle, from 0; default: 200")
    add_start(parser)
    add_controller(parser)
    add_sources(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Run the command."""
    if not 0 <= options.cycle < MOST_CYCLES:
        raise UsageError(f"--cycle: {options.cycle}, must be in [0, {MOST_CYCLES - 1}]")
    seed = check_seed(options)
    scaling = scale(load_mission(options.mission))
    controller = load_controller(options.controller, announce_sources(options))
    flight = Flight(scaling, options.cycle + 1, seed=seed, along_field=options.along_field)
    with progress("flying", flight.cycles) as bar:
        (record,) = fly([flight], controller, bar.update)
    truth = Truth([scaling])
    with progress("following with the truth", flight.cycles) as bar:
        for i in range(flight.cycles):
            step = truth.step(record.inputs[i : i + 1], record.outputs[i : i + 1])
            bar.update()
    announce_mission(scaling)
    print(f"cycle     {options.cycle} through {controller.name}, {record.time_s[-1]:.6g} s after the first sample; true rate {record.true_rate_deg_s[-1]:.4g} °/s\n")
    print(table(_rows(record, scaling, controller.interface)))
    print("\n" + table(_truth_rows(record, scaling, step)))
    print("\n" + "\n".join(_told(record, controller.interface)))
    return 0


def _rows(record: Record, scaling: Scaling, interface: Interface) -> list[tuple[str, str, str, str]]:
    rows = [("stage", "value", "integers", "physical")]
    for title, records in (("inputs", record.inputs), ("outputs", record.outputs)):
        names = [f"{title}.{c}" for c in columns(records.dtype)]
        values = to_columns(records[-1:])[0].tolist()
        order = in_stage_order(names) if title == "outputs" else range(len(names))
        groups: dict[str, list[int]] = {}
        for i in order:
            groups.setdefault(names[i].partition("[")[0], []).append(i)
        previous = ""
        for group, indices in groups.items():
            stage = "inputs" if title == "inputs" else stage_of(group)
            physical = _physical(group, names, values, indices, scaling, interface)
            integers = "  ".join(str(values[i]) for i in indices)
            rows.append((stage if stage != previous else "", group.rpartition(".")[2], integers, physical))
            previous = stage
    return rows


def _physical(group: str, names: list[str], values: list[int], indices: list[int], scaling: Scaling, interface: Interface) -> str:
    """What the integers of a field stand for: quantities with their unit, codes by name, words of bits in hexadecimal."""
    leaf, value = group.rpartition(".")[2], values[indices[0]]
    if leaf == "mode":
        return interface.mode_name(value)
    if leaf == "active":
        return interface.header.named("MRD_LAW_")[value].lower()
    if leaf in ("status", "digest"):
        return f"0x{value:08x}"
    sizes = [scaling.size_of(names[i].partition(".")[2]) for i in indices]
    if sizes[0] is None:
        return ""
    return "  ".join(f"{size.value(values[i]):.7g}" for i, size in zip(indices, sizes, strict=True)) + f" {sizes[0].unit}"


def _truth_rows(record: Record, scaling: Scaling, step: TruthStep) -> list[tuple[str, str, str, str, str]]:
    rows = [("truth", "controller", "truth", "apart", "bound")]
    command, ticks = record.outputs["trace"]["saturation"]["command"][-1], record.outputs["trace"]["pulses"]["ticks"][-1]
    for axis, name in enumerate("xyz"):
        size = scaling.command_a_m2(axis) * 1e3
        apart = abs(command[axis] - step.command[axis, 0]) * size
        rows.append((f"dipole {name}, mA m²", f"{command[axis] * size:.4f}", f"{step.command[axis, 0] * size:.4f}", f"{apart:.4f}",
                     f"{step.command_bound[axis, 0] * size:.4f}"))  # fmt: skip
    for axis, name in enumerate("xyz"):
        apart = abs(ticks[axis] - step.ticks[axis, 0])
        rows.append((f"pulse {name}, ticks", f"{ticks[axis]}", f"{step.ticks[axis, 0]:.2f}", f"{apart:.2f}", f"{step.ticks_bound[axis, 0]:.2f}"))
    return rows


def _told(record: Record, interface: Interface) -> list[str]:
    output = record.outputs[-1]
    texts = interface.status_texts(int(output["status"])) or ["nothing to report"]
    return [f"mode      {interface.mode_name(int(output['mode']))}", *(f"status    {text}" for text in texts)]
