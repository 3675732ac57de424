"""The only place where controller and plant meet: N closed-loop flights in lockstep.

Each cycle: the plant is sampled at mid-sample; the host fills the inputs; the controller answers with pulses; the plant flies
to the next mid-sample under them. The host stamps what really happened.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np

from pyharness.controllers import Controller
from pyharness.events import Event
from pyharness.host import Host
from pyharness.mission.model import Mission, Vector
from pyharness.plant import Plant
from pyharness.plant.field import Environment
from pyharness.plant.orbit import orbital_period
from pyharness.scaling import Scaling


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


def settling_time_s(mission: Mission) -> float:
    """By when a mission should have settled: an orbit to stop the tumble, and its hold-off and dwell, s."""
    return orbital_period(mission.orbit) + mission.control.hold_off_s + mission.control.dwell_s


def long_cycles(scaling: Scaling) -> int:
    """That time in full cycles."""
    return math.ceil(settling_time_s(scaling.mission) / scaling.period_s)


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


@dataclass(frozen=True)
class Cycle:
    """One cycle of all flights that are still on, in the order in which `each_cycle` was given them; n of them, and all arrays are new."""

    number: int
    inputs: np.ndarray  # (n,) records mrd_inputs
    outputs: np.ndarray  # (n,) records mrd_outputs
    rate_rad_s: np.ndarray  # (n, 3) true, body axes at mid-sample
    field_t: np.ndarray  # (n, 3) true
    applied_ticks: np.ndarray  # (n, 3) pulses as they really were


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
    order = longest_first(flights)
    ordered = [flights[i] for i in order]
    n, longest = len(ordered), ordered[0].cycles
    inputs = np.zeros((longest, n), controller.interface.inputs)
    outputs = np.zeros((longest, n), controller.interface.outputs)
    rate, field_t, applied = np.empty((longest, n, 3)), np.empty((longest, n, 3)), np.zeros((longest, n, 3), np.int32)
    for cycle in each_cycle(ordered, controller, environment):
        row, on = cycle.number, len(cycle.outputs)
        inputs[row, :on], outputs[row, :on] = cycle.inputs, cycle.outputs
        rate[row, :on], field_t[row, :on], applied[row, :on] = cycle.rate_rad_s, cycle.field_t, cycle.applied_ticks
        if progress:
            progress(1)
    placed = {
        i: Record(
            flight=flights[i], controller=controller.name, time_s=np.arange(flights[i].cycles) * flights[i].scaling.period_s,
            **{name: values[: flights[i].cycles, place].copy() for name, values in
               (("inputs", inputs), ("outputs", outputs), ("rate_rad_s", rate), ("field_t", field_t), ("applied_ticks", applied))},
        )
        for place, i in enumerate(order)
    }  # fmt: skip
    return [placed[i] for i in range(len(flights))]


def longest_first(flights: Sequence[Flight]) -> list[int]:
    """The order in which a batch is flown: the flights that are still on are always the first of it."""
    return sorted(range(len(flights)), key=lambda i: -flights[i].cycles)


def each_cycle(flights: Sequence[Flight], controller: Controller, environment: Environment | None = None) -> Iterator[Cycle]:
    """Fly a batch, longest flight first, and hand out every cycle: for those who keep only some of it."""
    controller.configure([flight.scaling for flight in flights])
    n, longest = len(flights), flights[0].cycles
    plant = _plant(flights, longest, environment)
    host = Host(flights, controller)
    lengths = np.array([flight.cycles for flight in flights])
    ticks, late = np.zeros((3, n), dtype=np.int64), np.zeros((3, n), dtype=np.int64)
    inputs = np.zeros(n, controller.interface.inputs)

    for cycle in range(longest):
        on = int((lengths > cycle).sum())
        host.kick(plant, cycle)
        offset_us = host.sample_offset_us(cycle)
        inputs = host.inputs(plant.sample(offset_us * 1e-6), offset_us, cycle, inputs)
        rate, field_t = plant.rate, plant.field_body
        host.tamper(cycle)
        outputs = controller.step(inputs[:on])
        ticks[:, :on] = outputs["ticks"].T
        ticks[:, on:] = 0
        host.late_ticks(late, ticks, cycle)
        applied = ticks + np.sign(ticks) * late
        host.stamp(plant.drive(ticks, late, host.health(ticks, cycle)), ticks, cycle)
        yield Cycle(cycle, inputs[:on], outputs, rate[:, :on].T, field_t[:, :on].T, applied[:, :on].T)


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
