"""Every single bit of state, configuration and inputs, flipped at several moments of a flight: what the controller makes of it.

The inputs are those of a recorded flight: the flip is in one cycle, the cycles after it come as recorded. A state that flipped is
to be caught in the same cycle, a configuration too; an input that flipped is to be forgotten. Flown with the C.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cache
from typing import Literal

import numpy as np

from pyharness.controllers.c import CController
from pyharness.exact import constants as mrd
from pyharness.flight.records import columns, flip_bit, to_columns, to_record
from pyharness.loop import Record

Part = Literal["state", "config", "inputs"]
FORGOTTEN_AFTER = 3
"""Cycles after which an input that flipped acts no more, but for what a low-pass remembers."""
FOLLOWED = 12
"""Cycles that are looked at, the one with the flip included, without a low-pass."""


@dataclass(frozen=True)
class Tally:
    """What came of all flips of one part at one moment; numbers of flips."""

    moment: str
    part: Part
    tried: int
    caught: int  # told in the same cycle by STATE_RESTARTED or CONFIG_CORRUPT, all coils off in it
    unchanged: int  # the same pulses and mode as without, in every cycle
    forgotten: int  # others than these from cycle `longest` on, at the latest
    lasting: int  # others to the end
    longest: int  # cycles until the last difference in pulses or mode was over, of those that were forgotten
    wild: int  # a pulse beyond its limit, or from a mode that makes none
    examples: tuple[str, ...]  # the bits that are not as they should be

    @property
    def passed(self) -> bool:
        """Whether all is as it should be."""
        return not self.examples


@dataclass(frozen=True)
class Moment:
    """A cycle of a recorded flight; `commands` are given in the cycles before it, one each."""

    name: str
    cycle: int
    commands: tuple[int, ...] = ()


def bit_moments(record: Record) -> list[Moment]:
    """Moments that differ in what the controller is doing. Raises ValueError for a flight that does not damp and settle."""
    mode = record.outputs["mode"]
    found = {m: np.flatnonzero(mode == m) for m in (mrd.MRD_MODE_HOLD_OFF, mrd.MRD_MODE_DAMPING, mrd.MRD_MODE_SETTLED)}
    if not all(cycles.size for cycles in found.values()):
        raise ValueError("the recorded flight does not go through hold-off, damping and settled")
    damping, settled = found[mrd.MRD_MODE_DAMPING], found[mrd.MRD_MODE_SETTLED]
    middle = int(damping[len(damping) // 4])
    return [
        Moment("hold-off", int(found[mrd.MRD_MODE_HOLD_OFF][-1]) // 2),
        Moment("first pulses", int(damping[0]) + 20),
        Moment("damping", middle),
        Moment("dwell", int(settled[0]) - record.flight.scaling.config["supervisor"]["settle_dwell"] // 2),
        Moment("settled", int(settled[0]) + 50),
        Moment("inhibited", middle, (mrd.MRD_COMMAND_INHIBIT,)),
        Moment("safe", middle, (mrd.MRD_COMMAND_SAFE,)),
        Moment("bench", middle, (mrd.MRD_COMMAND_SAFE, mrd.MRD_COMMAND_ARM)),
    ]


def flip_every_bit(record: Record, controller: CController, moments: Sequence[Moment] | None = None) -> Iterator[Tally]:
    """Flip every bit of every part at every moment; hands out a tally for each."""
    for moment in bit_moments(record) if moments is None else moments:
        for part in ("state", "config", "inputs"):
            yield _flip_part(_Situation(record, controller, moment), part)


class _Situation:
    """The controller just before a moment, and what comes next."""

    def __init__(self, record: Record, controller: CController, moment: Moment):
        self.moment, self.controller, self.library = moment, controller, controller.library
        config = record.flight.scaling.config
        self.memory = 0 if config["path"]["filter_gain"] == 2**15 else -(-2**19 // config["path"]["filter_gain"])
        inputs = record.inputs[: moment.cycle + FOLLOWED + self.memory].copy()
        for i, code in enumerate(moment.commands):
            inputs["command"][moment.cycle - len(moment.commands) + i] = code
        inputs["command_key"] = config["supervisor"]["bench_key"]
        controller.configure([record.flight.scaling])
        controller.run(inputs[: moment.cycle])
        self.state = controller.peek(0, "state").reshape(1)
        self.config = to_record(controller.interface.config, config).reshape(1)
        self.inputs = inputs[moment.cycle :]
        self.window = config["path"]["window_ticks"]

    def run(self, part: Part | None, flips: Sequence[tuple[str, int]]) -> np.ndarray:
        """Outputs (cycles, flips) with one flip each; of the state before the first cycle, of its inputs, or of the configuration for good."""
        n = len(flips)
        parts = {"state": self.state.repeat(n), "config": self.config.repeat(n), "inputs": self.inputs[:1].repeat(n)}
        for i, (column, bit) in enumerate(flips):
            if part is not None:
                flip_bit(parts[part][i], column, bit)
        outputs = np.empty((len(self.inputs), n), self.controller.interface.outputs)
        for cycle in range(len(self.inputs)):
            inputs = parts["inputs"] if cycle == 0 else self.inputs[cycle : cycle + 1].repeat(n)
            self.library.step_many(parts["state"], parts["config"], inputs, outputs[cycle])
        return outputs


@cache
def _flips(dtype: np.dtype) -> list[tuple[str, int]]:
    """Every bit of every integer of a record; padding has no name."""
    zero = np.zeros(1, dtype)
    found = []
    for index, column in enumerate(columns(dtype)):
        flipped = zero.copy()
        for bit in range(32):
            try:
                flip_bit(flipped[0], column, bit)
            except OverflowError:
                break
            if not to_columns(flipped)[0, index]:
                break
            found.append((column, bit))
            flipped = zero.copy()
    return found


def _flip_part(at: _Situation, part: Part) -> Tally:
    flips = _flips(at.controller.interface.state if part == "state" else getattr(at.controller.interface, part))
    want = at.run(None, [("", 0)])
    outputs = at.run(part, flips)
    differs = (outputs["ticks"] != want["ticks"]).any(axis=2) | (outputs["mode"] != want["mode"])
    apart = np.abs(outputs["ticks"].astype(int) - want["ticks"])
    if at.memory:  # a rounded low-pass may stay a count apart
        differs = (apart > 1).any(axis=2) | (outputs["mode"] != want["mode"])
    until = np.where(differs.any(axis=0), len(differs) - differs[::-1].argmax(axis=0), 0)
    told = {"state": 1 << mrd.MRD_S_STATE_RESTARTED, "config": 1 << mrd.MRD_S_CONFIG_CORRUPT, "inputs": 0}[part]
    off = (outputs["ticks"][0] == 0).all(axis=1)
    caught = (outputs["status"][0] & np.uint32(told) != 0) & off
    drives = (outputs["mode"] == mrd.MRD_MODE_DAMPING) | (outputs["mode"] == mrd.MRD_MODE_BENCH)
    wild = ((np.abs(outputs["ticks"].astype(int)) > at.window).any(axis=2) | ((outputs["ticks"] != 0).any(axis=2) & ~drives)).any(axis=0)
    lasting = until >= len(differs)
    wrong = wild | _wrong(at, part, caught, until, outputs)
    return Tally(
        moment=at.moment.name, part=part, tried=len(flips), caught=int(caught.sum()), unchanged=int((until == 0).sum()),
        forgotten=int(((until > 0) & ~lasting).sum()), lasting=int(lasting.sum()), longest=int(until[~lasting].max(initial=0)),
        wild=int(wild.sum()), examples=tuple(f"{flips[i][0]} bit {flips[i][1]}" for i in np.flatnonzero(wrong)[:8]),
    )  # fmt: skip


def _wrong(at: _Situation, part: Part, caught: np.ndarray, until: np.ndarray, outputs: np.ndarray) -> np.ndarray:
    """Which flips are not answered as they should be."""
    if part == "state":
        return ~caught
    if part == "config":
        return ~caught | (outputs["mode"] != mrd.MRD_MODE_SAFE).any(axis=0) | (outputs["ticks"] != 0).any(axis=(0, 2))
    return until > FORGOTTEN_AFTER + at.memory
