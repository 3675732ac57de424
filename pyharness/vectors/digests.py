"""Long flights as a hash: too long to be read, but regenerated and compared to the last integer.

A digest file is JSON: what was flown, SHA-256 over all integers of the flight, and one over the integers so far every
`CHECKPOINT` cycles, so that a difference can be placed.
"""

from __future__ import annotations

import hashlib
import json
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
        "config_digest": f"{record.flight.scaling.config['digest']:08x}",
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
    """Fly every long flight that the folder has a digest of, and compare. Raises NoVectors if there is none."""
    contents = [read_digest(path) for path in sorted((folder / "digests").glob("*.json"))]
    if not contents:
        raise NoVectors(f"{folder}: no digests here; write them with: slackwater vectors write --out {folder}")
    known = {scenario.name: scenario for scenario in LONG}
    if unknown := [content["name"] for content in contents if content["name"] not in known]:
        raise VectorError(f"{folder}: digests of unknown flights: {', '.join(unknown)}")
    flights = [known[content["name"]].flight(mission_path) for content in contents]
    bar.total = max(flight.cycles for flight in flights)
    records = fly(flights, controller, bar.update)
    return [verdict(content, record) for content, record in zip(contents, records, strict=True)]


def verdict(content: dict[str, Any], record: Record) -> Verdict:
    """What a flight has to say to a digest file."""
    difference = first_difference(content, record)
    told = difference or f"all {len(content['checkpoints'])} hashes equal"
    return Verdict(f"digests/{content['name']}", content["purpose"], len(record.inputs), difference is None, told)


def read_digest(path: Path) -> dict[str, Any]:
    """Read a digest file. Raises VectorError."""
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
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
    digest = f"{record.flight.scaling.config['digest']:08x}"
    if content["config_digest"] != digest:
        return f"configuration {digest}, the digest is for {content['config_digest']}"
    found = hashes(record)
    if len(record.inputs) != content["cycles"]:
        return f"{len(record.inputs)} cycles, the digest has {content['cycles']}"
    for i, (want, have) in enumerate(zip(content["checkpoints"], found, strict=False)):
        if want != have:
            every = content["checkpoint_every"]
            return f"integers differ first between cycles {i * every} and {min((i + 1) * every, content['cycles']) - 1}"
    return None if len(found) == len(content["checkpoints"]) else "the number of checkpoints differs"
