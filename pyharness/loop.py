"""The only place where controller and plant meet: N closed-loop flights in lockstep.

Each cycle: the plant is sampled at mid-sample; the host fills the inputs; the controller answers with pulses; the plant flies
to the next mid-sample under them. The host stamps what really happened.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from pyharness.controllers import Controller
from pyharness.events import (
    Command,
    DropGyro,
    DropSample,
    Event,
    Jitter,
    Kick,
    LateStamps,
    LateSwitchOff,
    LoseStamps,
    LowPower,
    jitter_us,
)
from pyharness.mission.model import Vector
from pyharness.plant import Plant, Sample
from pyharness.plant.field import Environment
from pyharness.scaling import Scaling

WRAP = 2**32


@dataclass(frozen=True)
class Flight:
    """One flight to be flown."""

    scaling: Scaling
    cycles: int
    seed: int = 1
    rate_deg_s: Vector | None = None  # at the start, body axes; None: the mission's tip-off rate
    along_field: bool = False  # turn that rate along the field as it is at the start
    start_us: int = 1_000_000  # host clock at the start of the first cycle
    separation_s: int = 0  # since separation, at the start of the first cycle
    orbit_s: float = 0.0  # start after the epoch of the orbit
    supply_v: float | None = None  # that drives the coils; None: nominal
    events: tuple[Event, ...] = field(default=())


@dataclass
class Record:
    """What a flight left behind: one row for each cycle. Vectors are in body axes at mid-sample."""

    flight: Flight
    controller: str
    inputs: np.ndarray  # (cycles,) records mrd_inputs
    outputs: np.ndarray  # (cycles,) records mrd_outputs
    time_s: np.ndarray  # (cycles,) from the first mid-sample
    rate_rad_s: np.ndarray  # (cycles, 3) true
    field_t: np.ndarray  # (cycles, 3) true
    applied_ticks: np.ndarray  # (cycles, 3) pulses as they really were

    @property
    def true_rate_deg_s(self) -> np.ndarray:
        """True ‖ω‖, (cycles,), °/s."""
        return np.degrees(np.sqrt((self.rate_rad_s**2).sum(axis=1)))

    def bit(self, number: int) -> np.ndarray:
        """Cycles, as (cycles,) bool, whose status word has this bit."""
        return (self.outputs["status"] >> np.uint32(number) & 1).astype(bool)


def fly(
    flights: Sequence[Flight],
    controller: Controller,
    progress: Callable[[int], None] | None = None,
    environment: Environment | None = None,
) -> list[Record]:
    """Fly all flights in one batch with one controller. `progress(n)` is told of n more cycles of the longest flight.

    `environment` takes the place of the orbits' (a `ConstantField`, say). The result of a flight does not depend on the
    others. All missions must have the same period (ValueError).
    """
    # Longest first: the flights that are still on are always the first of the batch.
    order = sorted(range(len(flights)), key=lambda i: -flights[i].cycles)
    ordered = [flights[i] for i in order]
    records = _fly_ordered(ordered, controller, progress or (lambda n: None), environment)
    result: list[Record | None] = [None] * len(flights)
    for place, record in zip(order, records, strict=True):
        result[place] = record
    return result


def _fly_ordered(
    flights: list[Flight], controller: Controller, progress: Callable[[int], None], environment: Environment | None
) -> list[Record]:
    scalings = [flight.scaling for flight in flights]
    controller.configure(scalings)
    n, longest = len(flights), flights[0].cycles
    plant = _plant(flights, longest, environment)
    host = _Host(flights)
    lengths = np.array([flight.cycles for flight in flights])

    inputs = np.zeros((longest, n), controller.interface.inputs)
    outputs = np.zeros((longest, n), controller.interface.outputs)
    rate, field_t = np.empty((longest, 3, n)), np.empty((longest, 3, n))
    applied = np.zeros((longest, 3, n), dtype=np.int32)
    ticks, late = np.zeros((3, n), dtype=np.int64), np.zeros((3, n), dtype=np.int64)

    for cycle in range(longest):
        on = int((lengths > cycle).sum())
        host.kick(plant, cycle)
        offset_us = host.sample_offset_us(cycle)
        sample = plant.sample(offset_us * 1e-6)
        host.fill(inputs[cycle], sample, offset_us, cycle)
        rate[cycle], field_t[cycle] = plant.rate, plant.field_body
        outputs[cycle, :on] = controller.step(inputs[cycle, :on])
        ticks[:, :on] = outputs[cycle, :on]["ticks"].T
        ticks[:, on:] = 0
        host.late_ticks(late, ticks, cycle)
        applied[cycle] = ticks + np.sign(ticks) * late
        host.stamp(plant.drive(ticks, late), ticks, cycle)
        progress(1)

    period_s = plant.period_us * 1e-6
    return [
        Record(
            flight=flight, controller=controller.name,
            inputs=inputs[: flight.cycles, i].copy(), outputs=outputs[: flight.cycles, i].copy(),
            time_s=np.arange(flight.cycles) * period_s,
            rate_rad_s=rate[: flight.cycles, :, i].copy(), field_t=field_t[: flight.cycles, :, i].copy(),
            applied_ticks=applied[: flight.cycles, :, i].copy(),
        )
        for i, flight in enumerate(flights)
    ]  # fmt: skip


def _plant(flights: list[Flight], cycles: int, environment: Environment | None) -> Plant:
    missions = [flight.scaling.mission for flight in flights]
    rates = [
        flight.scaling.mission.body.tip_off_deg_s if flight.rate_deg_s is None else flight.rate_deg_s for flight in flights
    ]
    plant = Plant(
        missions,
        [flight.seed for flight in flights],
        rate_rad_s=np.radians(np.array(rates, dtype=float).T),
        supply_v=np.array([f.scaling.mission.supply.nominal_v if f.supply_v is None else f.supply_v for f in flights]),
        start_s=np.array([flight.orbit_s for flight in flights]),
        field=environment,
        duration_s=(cycles + 2) * missions[0].cycle.period_ms * 1e-3,
    )
    speed = np.sqrt(np.add.reduce(plant.rate * plant.rate, axis=0))
    along = np.array([flight.along_field for flight in flights])
    plant.rate = np.where(along, plant.rate_along_field(speed), plant.rate)
    return plant


class _Host:
    """The host computers of N spacecraft: clocks, stamps, flags and commands."""

    def __init__(self, flights: list[Flight]):
        self._flights = flights
        self._start_us = np.array([flight.start_us for flight in flights], dtype=np.int64)
        config = [flight.scaling.config["path"] for flight in flights]
        self._period_us = config[0]["period_us"]
        self._phase_us = np.array([c["phase_us"] for c in config], dtype=np.int64)
        self._window_us = self._phase_us + np.array([c["delay_us"] for c in config], dtype=np.int64)
        self._separation_s = np.array([flight.separation_s for flight in flights], dtype=np.int64)
        self._gyro = np.array([c["gyro_fitted"] for c in config])
        # Until the first pulse, the stamps say that the coils went off a cycle ago.
        self._switch_off_us = np.repeat(self._start_us[:, None] - self._period_us, 3, axis=1)
        self._before_us = self._switch_off_us
        self._events = [(i, event) for i, flight in enumerate(flights) for event in flight.events]

    def _of(self, kind: type, cycle: int) -> list[tuple[int, Event]]:
        """The events of a kind that happen in this cycle, with their spacecraft."""
        return [(i, event) for i, event in self._events if isinstance(event, kind) and event.covers(cycle)]

    def kick(self, plant: Plant, cycle: int) -> None:
        """Set the rates of those that are kicked."""
        for i, event in self._of(Kick, cycle):
            rate = plant.rate
            rate[:, i] = np.radians(event.rate_deg_s)
            plant.rate = rate

    def sample_offset_us(self, cycle: int) -> np.ndarray:
        """How far each sample is from its nominal time, (N,)."""
        offset = np.zeros(len(self._flights), dtype=np.int64)
        for i, event in self._of(Jitter, cycle):
            offset[i] = jitter_us(event, cycle)
        return offset

    def fill(self, inputs: np.ndarray, sample: Sample, offset_us: np.ndarray, cycle: int) -> None:
        """Fill the inputs (N,) of one cycle."""
        start_us = self._start_us + cycle * self._period_us
        path = inputs["path"]
        path["cycle_start_us"] = start_us % WRAP
        path["sample_us"] = (start_us + self._phase_us + offset_us) % WRAP
        path["switch_off_us"] = self._stamps(cycle, start_us) % WRAP
        path["mag_raw"] = sample.mag_counts.T
        path["gyro_raw"] = sample.gyro_counts.T
        path["mag_valid"] = 1
        path["gyro_valid"] = self._gyro
        inputs["separation_s"] = self._separation_s + cycle * self._period_us // 1_000_000
        for i, _ in self._of(DropSample, cycle):
            path["mag_valid"][i] = 0
            path["mag_raw"][i] = 0
        for i, _ in self._of(DropGyro, cycle):
            path["gyro_valid"][i] = 0
            path["gyro_raw"][i] = 0
        for i, _ in self._of(LowPower, cycle):
            inputs["low_power"][i] = 1
        for i, event in self._of(Command, cycle):
            inputs["command"][i], inputs["command_key"][i] = event.code, event.key
            inputs["command_coil"][i], inputs["command_ticks"][i] = event.coil, event.ticks

    def _stamps(self, cycle: int, start_us: np.ndarray) -> np.ndarray:
        """The stamps that the host hands in, (N, 3)."""
        for i, event in self._events:
            if isinstance(event, LoseStamps) and cycle == event.end:
                self._switch_off_us[i] = start_us[i]
        stamps = self._switch_off_us.copy()
        for i, _ in self._of(LateStamps, cycle):
            stamps[i] = self._before_us[i]
        return stamps

    def late_ticks(self, late: np.ndarray, ticks: np.ndarray, cycle: int) -> None:
        """Fill how late each coil (3, N) is switched off."""
        late[...] = 0
        for i, event in self._of(LateSwitchOff, cycle):
            if ticks[event.coil, i]:
                late[event.coil, i] = event.ticks

    def stamp(self, switch_off_us: np.ndarray, ticks: np.ndarray, cycle: int) -> None:
        """Take the actual switch-offs, µs after the start of the drive window, (3, N)."""
        self._before_us = self._switch_off_us
        actual = (self._start_us + cycle * self._period_us + self._window_us)[:, None] + switch_off_us.T
        stamped = ticks.T != 0
        for i, _ in self._of(LoseStamps, cycle):
            stamped[i] = False
        self._switch_off_us = np.where(stamped, actual, self._switch_off_us)
