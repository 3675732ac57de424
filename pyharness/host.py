"""The host computers of N spacecraft, and what goes wrong in and around them: clocks, stamps, flags, commands, memory."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, TypeVar

import numpy as np

from pyharness.controllers import Controller
from pyharness.events import (
    Command,
    CountsEvent,
    DropGyro,
    DropSample,
    FlipBit,
    ForceMode,
    Jitter,
    Kick,
    LateStamps,
    LateSwitchOff,
    LoseStamps,
    LowPower,
    RepeatInputs,
    RestartController,
    SetClock,
    ShiftSample,
    SickCoil,
    StaysOn,
    SwapCoils,
)
from pyharness.flight.records import flip_bit
from pyharness.plant import CoilHealth, Plant, Sample

if TYPE_CHECKING:
    from pyharness.loop import Flight

WRAP = 2**32
_SICK = (SickCoil, SwapCoils, StaysOn)
Kind = TypeVar("Kind")


class Host:
    """The host computers of the flights of a batch."""

    def __init__(self, flights: Sequence[Flight], controller: Controller):
        self._controller = controller
        self._n = len(flights)
        self._start_us = np.array([flight.start_us for flight in flights], dtype=np.int64)
        config = [flight.scaling.config["path"] for flight in flights]
        self._period_us = config[0]["period_us"]
        self._phase_us = np.array([c["phase_us"] for c in config], dtype=np.int64)
        self._window_us = self._phase_us + np.array([c["delay_us"] for c in config], dtype=np.int64)
        self._separation_s = np.array([flight.separation_s for flight in flights], dtype=np.int64)
        self._gyro = np.array([c["gyro_fitted"] for c in config])
        self._current = np.array([c["current_fitted"] for c in config])
        # Until the first pulse, the stamps say that the coils went off a cycle ago.
        self._switch_off_us = np.repeat(self._start_us[:, None] - self._period_us, 3, axis=1)
        self._before_us = self._switch_off_us
        self._stuck = np.zeros((3, self._n))  # coils that stay on, with their sign
        self._events = [(i, event) for i, flight in enumerate(flights) for event in flight.events]
        self._by_kind: dict[type, list] = {}

    def _of(self, kind: type[Kind]) -> list[tuple[int, Kind]]:
        """The events of a kind, with their spacecraft."""
        if kind not in self._by_kind:
            self._by_kind[kind] = [(i, event) for i, event in self._events if isinstance(event, kind)]
        return self._by_kind[kind]

    def _now(self, kind: type[Kind], cycle: int) -> list[tuple[int, Kind]]:
        """Those that happen in this cycle."""
        return [(i, event) for i, event in self._of(kind) if event.covers(cycle)]

    def kick(self, plant: Plant, cycle: int) -> None:
        """Set the rates of those that are kicked."""
        for i, event in self._now(Kick, cycle):
            rate = plant.rate
            rate[:, i] = np.radians(event.rate_deg_s)
            plant.rate = rate

    def sample_offset_us(self, cycle: int) -> np.ndarray:
        """How far each sample is from its nominal time, (N,)."""
        offset = np.zeros(self._n, dtype=np.int64)
        for kind in (Jitter, ShiftSample):
            for i, event in self._now(kind, cycle):
                offset[i] = event.offset_us(cycle)
        return offset

    def inputs(self, sample: Sample, offset_us: np.ndarray, cycle: int, before: np.ndarray) -> np.ndarray:
        """The inputs (N,) of one cycle; `before` are those of the cycle before."""
        for i, event in self._now(SetClock, cycle):
            self._start_us[i] += event.us
        start_us = self._start_us + cycle * self._period_us
        inputs = np.zeros_like(before)
        path = inputs["path"]
        path["cycle_start_us"] = start_us % WRAP
        path["sample_us"] = (start_us + self._phase_us + offset_us) % WRAP
        path["switch_off_us"] = self._stamps(cycle, start_us) % WRAP
        path["mag_raw"] = sample.mag_counts.T
        path["gyro_raw"] = sample.gyro_counts.T
        path["mag_valid"] = 1
        path["gyro_valid"] = self._gyro
        path["current_valid"] = self._current
        path["current_driven"] = sample.driven_counts.T
        path["current_sampled"] = sample.sampled_counts.T
        inputs["separation_s"] = self._separation_s + cycle * self._period_us // 1_000_000
        self._disturb(inputs, cycle, before)
        return inputs

    def _disturb(self, inputs: np.ndarray, cycle: int, before: np.ndarray) -> None:
        path = inputs["path"]
        for i, event in self._now(CountsEvent, cycle):
            name = f"{event.sensor}_raw"
            path[name][i] = np.clip(event.counts(path[name][i].astype(np.int64), before["path"][name][i], cycle), -32768, 32767)
        for i, _ in self._now(DropSample, cycle):
            path["mag_valid"][i] = 0
            path["mag_raw"][i] = 0
        for i, _ in self._now(DropGyro, cycle):
            path["gyro_valid"][i] = 0
            path["gyro_raw"][i] = 0
        for i, _ in self._now(LowPower, cycle):
            inputs["low_power"][i] = 1
        for i, event in self._now(Command, cycle):
            inputs["command"][i], inputs["command_key"][i] = event.code, event.key
            inputs["command_coil"][i], inputs["command_ticks"][i] = event.coil, event.ticks
        for i, _ in self._now(RepeatInputs, cycle):
            inputs[i] = before[i]
        for i, event in self._now(FlipBit, cycle):
            if event.part == "inputs":
                flip_bit(inputs[i], event.column, event.bit)

    def tamper(self, cycle: int) -> None:
        """What happens to the controller's memory before its step."""
        for i, event in self._now(FlipBit, cycle):
            if event.part != "inputs":
                record = self._controller.peek(i, event.part)
                flip_bit(record, event.column, event.bit)
                self._controller.poke(i, event.part, record)
        for i, event in self._now(ForceMode, cycle):
            self._controller.force_mode(i, event.mode)
        for i, _ in self._now(RestartController, cycle):
            self._controller.restart(i)

    def _stamps(self, cycle: int, start_us: np.ndarray) -> np.ndarray:
        """The stamps that the host hands in, (N, 3)."""
        for i, event in self._of(LoseStamps):
            if cycle == event.end:
                self._switch_off_us[i] = start_us[i]
        for i, event in self._of(StaysOn):
            if cycle == event.end + 1:  # it was on up to the sample of `end`
                self._switch_off_us[i, event.coil] = start_us[i]
        for i, _ in self._now(RestartController, cycle):
            self._switch_off_us[i] = start_us[i]
        stamps = self._switch_off_us.copy()
        for i, _ in self._now(LateStamps, cycle):
            stamps[i] = self._before_us[i]
        return stamps

    def late_ticks(self, late: np.ndarray, ticks: np.ndarray, cycle: int) -> None:
        """Fill how late each coil (3, N) is switched off."""
        late[...] = 0
        for i, event in self._now(LateSwitchOff, cycle):
            if ticks[event.coil, i]:
                late[event.coil, i] = event.ticks

    def health(self, ticks: np.ndarray, cycle: int) -> CoilHealth | None:
        """What coils and drivers make of the pulses (3, N) of this cycle; None where no coil is sick."""
        if not any(self._now(kind, cycle) for kind in _SICK) and not self._stuck.any():
            return None
        health = CoilHealth.nominal(self._n)
        for i, event in self._now(SickCoil, cycle):
            health.current[event.coil, i], health.leads[event.coil, i] = event.current, event.leads
            health.held[event.coil, i] = event.held
        for i, event in self._now(SwapCoils, cycle):
            a, b = event.coils
            health.wiring[[a, b], i] = health.wiring[[b, a], i]
        self._keep_on(ticks, cycle)
        health.held[...] = np.where(self._stuck != 0, self._stuck, health.held)
        return health

    def _keep_on(self, ticks: np.ndarray, cycle: int) -> None:
        covered = np.zeros((3, self._n), dtype=bool)
        for i, event in self._now(StaysOn, cycle):
            covered[event.coil, i] = True
            if not self._stuck[event.coil, i]:
                self._stuck[event.coil, i] = np.sign(ticks[event.coil, i])
        self._stuck[~covered] = 0.0

    def stamp(self, switch_off_us: np.ndarray, ticks: np.ndarray, cycle: int) -> None:
        """Take the actual switch-offs, µs after the start of the drive window, (3, N)."""
        self._before_us = self._switch_off_us
        actual = (self._start_us + cycle * self._period_us + self._window_us)[:, None] + switch_off_us.T
        stamped = (ticks.T != 0) & (self._stuck.T == 0)
        for i, _ in self._now(LoseStamps, cycle):
            stamped[i] = False
        self._switch_off_us = np.where(stamped, actual, self._switch_off_us)
