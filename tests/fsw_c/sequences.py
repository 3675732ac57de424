"""Cycles of the demo mission by hand, for sequences that the C is to live through.

Period 500 ms, sample from 60 to 80 ms, drive window from 90 to 490 ms, blanking 60 ms.
"""

from __future__ import annotations

import math

import numpy as np

from pyharness import exact
from pyharness.exact import constants as mrd
from pyharness.mission import demo_path, load_mission
from pyharness.plant.sensors import rotation_matrix
from pyharness.scaling import scale

PERIOD, PHASE, HALF, DRIVE, BLANKING = 500_000, 70_000, 10_000, 90_000, 60_000
START = 10_000_000
FULL_US = 400_000
KEY = 0x5AA5
FIELD, RATE = (2000, -1500, 1000), (2000, -1000, 500)
"""Raw counts that ask for a full pulse on some axis, under the rate law."""

OFF = {"frozen_s": 0.0, "dead_axis_s": 0.0, "gyro_frozen_s": 0.0, "gyro_error_deg_s": 0.0, "jump_ut": 1000.0, "noise_ut": 1000.0}
"""`[defence]` with nothing to say against counts that stand still or leap."""


SENSE = {"counts_at_full": 2000, "noise_counts": 2.0}
"""`[current_sense]`: off within 100 counts, weak below 1784 (1 − e⁻³) / 2 = 847, both for pulses from 3 L/R on."""


def config_of(law: str = "rate", path: dict | None = None, supervisor: dict | None = None, defence: dict | None = None,
              control: dict | None = None, **tables) -> dict:  # fmt: skip
    """The demo's configuration with the checks of its sensors off, but for those that `defence` names.

    `path` and `supervisor` replace integers of it, `control` and further tables keys of the mission.
    """
    overrides = {"control": {"law": law, **(control or {})}, "defence": {**OFF, **(defence or {})}, **tables}
    config = scale(load_mission(demo_path(), overrides)).config
    return redigested({"path": {**config["path"], **(path or {})}, "supervisor": {**config["supervisor"], **(supervisor or {})}})


def redigested(config: dict) -> dict:
    """The configuration with the digest that goes with it."""
    return {**config, "digest": exact.config_digest(config)}


def cycle(n: int, stamps=None, **changes) -> dict:
    """Inputs of cycle n, with rate and field that ask for a full pulse; the stamps by default just old enough."""
    start = START + n * PERIOD
    old = start + PHASE - HALF - BLANKING
    path = {"cycle_start_us": start, "sample_us": start + PHASE, "switch_off_us": (old,) * 3 if stamps is None else stamps,
            "mag_raw": FIELD, "gyro_raw": RATE, "mag_valid": 1, "gyro_valid": 1,
            "current_valid": 1, "current_driven": (0, 0, 0), "current_sampled": (0, 0, 0)}  # fmt: skip
    inputs = {"path": path, "separation_s": 100, "low_power": 0, "command": 0, "command_key": 0, "command_coil": 0, "command_ticks": 0}
    for name, value in changes.items():
        (path if name in path else inputs)[name] = value
    return inputs


def end_of_pulses(n: int) -> tuple[int, ...]:
    """The stamps of pulses of cycle n that lasted the whole drive window."""
    return (START + n * PERIOD + DRIVE + FULL_US,) * 3


def stamped(n: int, **changes) -> dict:
    """Cycle n of a host that stamps every pulse."""
    return cycle(n, end_of_pulses(n - 1), **changes)


def measured(field_ut, rate_deg_s=(0.0, 0.0, 0.0)) -> dict:
    """Raw counts of a field and a rate, µT and °/s in body axes, as the demo's sensors hand them out without an error."""
    demo = load_mission(demo_path())
    counts = {}
    for name, part, value, known in (
        ("mag_raw", demo.magnetometer, field_ut, demo.magnetometer.bias_ut), ("gyro_raw", demo.gyro, rate_deg_s, demo.gyro.bias_deg_s)
    ):  # fmt: skip
        sensed = np.array(rotation_matrix(part.misalignment_deg)).T @ np.asarray(value) + known
        scale_factor = part.counts_per_ut if name == "mag_raw" else part.counts_per_deg_s
        counts[name] = tuple(np.rint(sensed * scale_factor).astype(int).tolist())
    return counts


def turning(turns_deg, gyro_sign=lambda n: 1) -> list[dict]:
    """Cycles in which the body turns about z by `turns_deg[n]` up to sample n, and its gyro says so; every pulse is stamped."""
    angle, sequence = 0.0, []
    for n, turn in enumerate(turns_deg):
        angle += math.radians(turn)
        field = (20.0 * math.cos(angle), -20.0 * math.sin(angle), 25.0)
        rate = gyro_sign(n) * turn / (PERIOD * 1e-6)
        sequence.append(stamped(n, **measured(field, (0.0, 0.0, rate))))
    return sequence


def has(outputs: np.ndarray, name: str) -> list[bool]:
    """In which cycles a status bit is set."""
    return [bool(status >> getattr(mrd, f"MRD_S_{name}") & 1) for status in outputs["status"]]


def trusted(outputs: np.ndarray) -> list[int]:
    """Which samples were used."""
    return outputs["trace"]["gate"]["trusted"].tolist()


def driven(outputs: np.ndarray) -> list[bool]:
    """In which cycles any coil got a pulse."""
    return (outputs["ticks"] != 0).any(axis=1).tolist()


def modes(outputs: np.ndarray) -> list[int]:
    """The mode of each cycle."""
    return outputs["mode"].tolist()
