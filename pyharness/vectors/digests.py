"""Long flights as a hash: too long to be read, but regenerated and compared to the last integer.

A digest file is JSON: what was flown, SHA-256 over all integers of the flight, and one over the integers so far every
`CHECKPOINT` cycles, so that a difference can be placed.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
from tqdm import tqdm

from pyharness.controllers import Controller
from pyharness.flight.records import to_columns
from pyharness.loop import Record, fly
from pyharness.scenarios import LONG, Scenario
from pyharness.vectors.files import NoVectors, VectorError
from pyharness.vectors.verdict import Verdict

FORMAT = "slackwater digest 1"
CHECKPOINT = 600


def digest_text(scenario: Scenario, record: Record, command: str) -> str:
    """The content of a digest file."""
    content = {
        "format": FORMAT,
        "name": scenario.name,
        "purpose": scenario.purpose,
        "seed": scenario.seed,
        "overrides": scenario.overrides,
        "command": command,
        "config_digest": config_digest(record),
        "cycles": len(record.inputs),
        "checkpoint_every": CHECKPOINT,
        "checkpoints": hashes(record),
    }
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def hashes(record: Record) -> list[str]:
    """SHA-256 (16 hex digits) of all integers up to each checkpoint, the last one over the whole flight.

    Hashed are inputs and outputs of each cycle, their columns in declared order, as little-endian 64-bit integers.
    """
    table = np.concatenate([to_columns(record.inputs), to_columns(record.outputs)], axis=1).astype("<i8")
    sha, result = hashlib.sha256(), []
    for start in range(0, len(table), CHECKPOINT):
        sha.update(table[start : start + CHECKPOINT].tobytes())
        result.append(sha.hexdigest()[:16])
    return result


def check_digests(folder: Path, controller: Controller, mission_path: str, bar: tqdm) -> list[Verdict]:
    """Fly every long flight and compare it with its digest. Raises NoVectors if the folder has none."""
    contents = {scenario.name: folder / "digests" / f"{scenario.name}.json" for scenario in LONG}
    present = [scenario for scenario in LONG if contents[scenario.name].is_file()]
    if not present:
        raise NoVectors(f"{folder}: no digests here; write them with: slackwater vectors write --out {folder}")
    flights = [scenario.flight(mission_path) for scenario in present]
    bar.total = max(flight.cycles for flight in flights)
    records = fly(flights, controller, bar.update)
    return [verdict(read_digest(contents[s.name]), record) for s, record in zip(present, records, strict=True)]


def known_digests(folder: Path, records: Sequence[Record]) -> list[tuple[dict[str, Any], Record]]:
    """The digests that a folder has of the flights of `LONG`, for flights of the configuration they are of."""
    known = []
    for scenario, record in zip(LONG, records, strict=True):
        path = folder / "digests" / f"{scenario.name}.json"
        if path.is_file():
            content = read_digest(path)
            if content["config_digest"] == config_digest(record):
                known.append((content, record))
    return known


def config_digest(record: Record) -> str:
    """The digest of the configuration that flew, as the files have it."""
    return f"{record.flight.scaling.config['digest']:08x}"


def verdict(content: dict[str, Any], record: Record) -> Verdict:
    """What a flight has to say to a digest file."""
    difference = first_difference(content, record)
    told = difference or f"all {len(content['checkpoints'])} hashes equal"
    return Verdict(f"digests/{content['name']}", content["purpose"], len(record.inputs), difference is None, told)


def read_digest(path: Path) -> dict[str, Any]:
    """Read a digest file. Raises VectorError."""
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError) as error:
        raise VectorError(f"{path}: cannot be read: {error}") from None
    if not isinstance(content, dict) or content.get("format") != FORMAT:
        raise VectorError(f"{path}: not a {FORMAT} file")
    keys = {"name": str, "purpose": str, "cycles": int, "checkpoints": list, "checkpoint_every": int, "config_digest": str}
    for key, kind in keys.items():
        if not isinstance(content.get(key), kind):
            raise VectorError(f"{path}: {key}: missing, or of the wrong kind")
    return content


def first_difference(content: dict[str, Any], record: Record) -> str | None:
    """Where a flight departs from a digest file, in words; None if it does not."""
    if content["config_digest"] != config_digest(record):
        return f"configuration {config_digest(record)}, the digest is for {content['config_digest']}"
    flown = {"cycles": len(record.inputs), "checkpoint_every": CHECKPOINT, "checkpoints": hashes(record)}
    if all(content[key] == value for key, value in flown.items()):
        return None
    return tell_digests_apart(flown, content)


def tell_digests_apart(a: dict[str, Any], b: dict[str, Any]) -> str:
    """Where two long flights, known by their hashes, part."""
    for key in ("cycles", "checkpoint_every"):
        if a[key] != b[key]:
            return f"{key}: {a[key]} against {b[key]}"
    every = a["checkpoint_every"]
    for i, (ours, theirs) in enumerate(zip(a["checkpoints"], b["checkpoints"], strict=False)):
        if ours != theirs:
            return f"integers differ first between cycles {i * every} and {min((i + 1) * every, a['cycles']) - 1}"
    return "the header only, or the number of checkpoints"
