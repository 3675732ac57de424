"""Write the golden vectors: inputs from the closed loop or made, expected outputs from the exact model, never from the C."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from pyharness.controllers import ExactController
from pyharness.flight import Interface
from pyharness.loop import Record, fly
from pyharness.mission import MissionError
from pyharness.scenarios import FAULTY, LONG, LOOP, Scenario
from pyharness.vectors.digests import digest_text
from pyharness.vectors.files import TIERS, VectorFile, sizes_of, to_text
from pyharness.vectors.unit import UNIT, Unit
from pyharness.whole_files import write_whole

COMMAND = "slackwater vectors write"


def make_vectors(
    mission_path: str, interface: Interface, long_flights: bool = True, progress: Callable[[int, int], None] | None = None
) -> dict[str, str]:
    """The content of every file, by its path within the folder ("loop/nominal.csv").

    The short scenarios are flown in one batch, the long ones in another, with the exact model in the loop. `progress(done, total)`
    counts cycles.
    Raises MissionError if a scenario's overrides do not fit the mission, naming the scenario.
    """
    long = len(LONG) if long_flights else 0
    scenarios = [*LOOP, *FAULTY, *LONG[:long]]
    flights = [_named(scenario, lambda s=scenario: s.flight(mission_path)) for scenario in scenarios]
    units = [(unit, _named(unit, lambda u=unit: u.scaling(mission_path))) for unit in UNIT]

    batches = [batch for batch in (flights[: len(flights) - long], flights[len(flights) - long :]) if batch]
    total, done = sum(max(flight.cycles for flight in batch) for batch in batches), 0

    def advance(cycles: int) -> None:
        nonlocal done
        done += cycles
        if progress:
            progress(done, total)

    records = [record for batch in batches for record in fly(batch, ExactController(interface), advance)]
    files = {}
    for unit, scaling in units:
        controller = ExactController(interface)
        controller.configure([scaling])
        inputs = unit.inputs(scaling.config, interface.inputs)
        vector = VectorFile(
            name=unit.name, tier="unit", purpose=unit.purpose, seed=unit.seed, overrides=unit.laid_over, command=COMMAND,
            config=scaling.config, sizes=sizes_of(scaling, interface), inputs=inputs, outputs=controller.run(inputs),
        )  # fmt: skip
        files[f"unit/{unit.name}.csv"] = to_text(vector)
    for scenario, record in zip(scenarios, records, strict=True):
        if scenario in LONG:
            files[f"digests/{scenario.name}.json"] = digest_text(scenario, record, COMMAND)
        else:
            files[f"loop/{scenario.name}.csv"] = to_text(_loop_file(scenario, record, interface))
    return files


def _loop_file(scenario: Scenario, record: Record, interface: Interface) -> VectorFile:
    scaling = record.flight.scaling
    return VectorFile(
        name=scenario.name, tier="loop", purpose=scenario.purpose, seed=scenario.seed, overrides=scenario.overrides,
        command=COMMAND, config=scaling.config, sizes=sizes_of(scaling, interface), inputs=record.inputs,
        outputs=record.outputs,
    )  # fmt: skip


def _named(item: Scenario | Unit, make: Callable):
    try:
        return make()
    except MissionError as error:
        if error.whole_file:
            raise
        raise MissionError(f"{error.source} as scenario {item.name} changes it", error.problems) from None


def write_folder(folder: Path, files: dict[str, str], keep_digests: bool = False) -> list[str]:
    """Put the files in place, each whole, and remove vectors that are no longer written. Returns what changed, by path."""
    changed = []
    for name, text in files.items():
        path = folder / name
        if not path.is_file() or path.read_text(encoding="utf-8") != text:
            path.parent.mkdir(parents=True, exist_ok=True)
            write_whole(path, text)
            changed.append(name)
    for tier in TIERS if keep_digests else (*TIERS, "digests"):
        for path in sorted((folder / tier).glob("*.*")):
            if (name := f"{tier}/{path.name}") not in files and path.suffix in (".csv", ".json"):
                path.unlink()
                changed.append(name)
    return changed
